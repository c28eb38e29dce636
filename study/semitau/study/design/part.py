"""Design in results.json: the proposed working point, what each cut and axis does, and whether other events confirm."""

from __future__ import annotations

from pydantic import Field

from ..result_part import Part


class DesignError(Part):
    """Expected error of one ratio."""

    ratio: str = Field(description="Identifier of the ratio")
    error: float = Field(ge=0, description="Expected error, all sources")
    relative: float = Field(ge=0, description="The same over the injected ratio")


class DesignCut(Part):
    """One scanned cut at a working point."""

    cut: str = Field(description="Which of the `curves` it is")
    value: float = Field(description="Where it cuts, in the unit of its observable")


class DesignBinning(Part):
    """Axes of the categories of one [[category]] table at a working point."""

    table: str = Field(description="Categories of the table, e.g. D0, D+ with e, μ")
    observables: tuple[str, ...] = Field(description="Axes in order")
    edges: tuple[tuple[float, ...], ...] = Field(description="Edges of each axis")
    bins: int = Field(description="Bins of one category")
    least: float = Field(description="Smallest expected content of a bin that expects anything, over its categories")


class DesignPoint(Part):
    """A working point with what is expected of it."""

    merit: float = Field(description="What is made small")
    errors: tuple[DesignError, ...] = Field(description="One entry a ratio")
    cuts: tuple[DesignCut, ...] = Field(description="Scanned cuts")
    binnings: tuple[DesignBinning, ...] = Field(description="One entry a [[category]] table")
    bins: int = Field(description="Bins that expect anything, over all categories")
    events: float = Field(description="Expected events in them")


class DesignCurve(Part):
    """Error against one cut, all else at the starting point and at the proposed one."""

    cut: str = Field(description="Identifier, e.g. e_res.max, with the categories if it differs between them")
    label: str = Field(description="Label for people")
    unit: str = Field(description="Unit of the values")
    values: tuple[float, ...] = Field(description="Scanned values, increasing")
    at_start: tuple[float | None, ...] = Field(description="Merit over that of the starting point; null: no fit there")
    at_proposed: tuple[float | None, ...] = Field(description="Merit over that of the proposed point")
    errors: tuple[tuple[float | None, ...], ...] = Field(
        description="Expected error of each ratio over that of the proposed point, all else at the proposed one"
    )
    start: float = Field(description="Value at the starting point")
    proposed: float = Field(description="Value at the proposed point")
    flat: tuple[float, float] = Field(description="Lowest and highest value up to which the merit rises less than that")
    matters: bool = Field(description="False if the whole scan is flat")


class DesignChoice(Part):
    """A binning that was compared: one choice of axes for one [[category]] table, the others as proposed."""

    table: str = Field(description="Categories of the table")
    observables: tuple[str, ...] = Field(description="Axes")
    bins: int = Field(description="Bins of one category after merging")
    merit: float | None = Field(description="Merit over that of the proposed point; null: no fit there")
    now: bool = Field(description="Whether these are the axes of the study file")
    chosen: bool = Field(description="Whether these are the proposed axes")


class DesignMerging(Part):
    """How the error grows as the edges of one [[category]] table are taken away, least harmful first."""

    table: str = Field(description="Categories of the table")
    bins: tuple[int, ...] = Field(description="Bins of one category, falling")
    merit: tuple[float, ...] = Field(description="Merit over that of the finest binning")
    chosen: int = Field(description="Bins of the proposed binning")


class DesignAxis(Part):
    """Where along an axis of the proposed binning the information on the ratios lies."""

    table: str = Field(description="Categories of the table")
    observable: str = Field(description="Axis")
    label: str = Field(description="Label for people")
    unit: str = Field(description="Unit of the edges")
    edges: tuple[float, ...] = Field(description="Edges of its bins")
    shares: tuple[tuple[float, ...], ...] = Field(
        description="For each ratio the share of each bin in the information of the counts, over all other axes"
    )
    loss: float | None = Field(description="Rise of the merit without this axis, relative; null: no fit without it")


class DesignCategory(Part):
    """What one category is worth."""

    category: str = Field(description="Identifier of the category")
    label: str = Field(description="Label for people")
    loss: float | None = Field(description="Rise of the merit without it, relative; null: no fit without it")


class DesignVariation(Part):
    """What one variation costs at the proposed point."""

    nuisance: str = Field(description="Identifier of the nuisance")
    label: str = Field(description="Label for people")
    before: float = Field(description="Fall of the merit at the starting point if it were known exactly, relative")
    after: float = Field(description="The same at the proposed point")


class DesignConfirmation(Part):
    """Starting and proposed point on events that the search did not see."""

    start: tuple[DesignError, ...] = Field(description="Expected errors at the starting point")
    proposed: tuple[DesignError, ...] = Field(description="Expected errors at the proposed point")
    gain: float = Field(description="Fall of the merit from the starting to the proposed point, relative")
    uncertainty: float = Field(ge=0, description="Statistical error of the gain, from batches of the events")
    noise: tuple[float, float] | None = Field(
        description="Rise of the merit, relative, at both points if information from template fluctuations is taken "
        "out, as it is in the gain; null if there are too few events to do so"
    )
    confirmed: bool = Field(description="Whether the gain is more than twice its uncertainty, and noise is known")


class Design(Part):
    """The selection and binning with the smallest total expected error."""

    minimised: str = Field(description="What is made small: mean, area, or the name of a ratio")
    ratios: tuple[str, ...] = Field(description="Identifiers of the ratios, in the order of all lists")
    labels: tuple[str, ...] = Field(description="Their labels for people")
    start: DesignPoint = Field(description="The study as it is")
    proposed: DesignPoint = Field(description="The best that was found")
    gain: float = Field(description="Fall of the merit on the events of the search, relative")
    confirmation: DesignConfirmation = Field(description="The same on independent events")
    flat: float = Field(description="Relative rise of the merit up to which a cut counts as flat")
    curves: tuple[DesignCurve, ...] = Field(description="Error against each cut")
    choices: tuple[DesignChoice, ...] = Field(description="Axes that were compared; empty if binnings stay")
    mergings: tuple[DesignMerging, ...] = Field(description="Error against the number of bins; empty if binnings stay")
    axes: tuple[DesignAxis, ...] = Field(description="Information along each axis")
    categories: tuple[DesignCategory, ...] = Field(description="What each category is worth at the proposed point")
    variations: tuple[DesignVariation, ...] = Field(description="What each variation costs, the dearest first")
    points: int = Field(description="Working points that were looked at")
    generated: int = Field(description="Events generated for the search")
    snippet: str = Field(description="TOML for the study file: what changes; empty if nothing does")
    notes: tuple[str, ...] = Field(description="What the reader should know")
