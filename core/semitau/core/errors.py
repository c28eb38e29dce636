"""Errors that users meet: data with advice, never a bare sentence."""

from __future__ import annotations

from dataclasses import dataclass, replace


@dataclass(frozen=True)
class Problem:
    """One thing that is wrong, and what to do about it.

    what : the rule that was broken, e.g. "edges must increase".
    where : place: "file:line: key", "file", a folder, a template path; "" if there is none.
    got, wanted : the offending value and what is allowed, as text; "" if they add nothing.
    remedy : the next step for the user; "" if the rest says it.
    """

    what: str
    where: str = ""
    got: str = ""
    wanted: str = ""
    remedy: str = ""

    def __str__(self) -> str:
        text = f"{self.where}: {self.what}" if self.where else self.what
        details = [f"got {self.got}"] * bool(self.got) + [f"allowed {self.wanted}"] * bool(self.wanted)
        if details:
            text += f" ({', '.join(details)})"
        return f"{text}. {self.remedy}" if self.remedy else text

    def inside(self, place: str) -> Problem:
        """The same problem, seen from further out: `place` is put before where it is."""
        return replace(self, where=f"{place}: {self.where}" if self.where else place)


class SemitauError(Exception):
    """Base of every error that reaches a user; `status` is the exit status of the command."""

    status = 1

    def __init__(self, *problems: Problem) -> None:
        self.problems = problems
        super().__init__("\n".join(map(str, problems)))

    def __reduce__(self) -> tuple[type[SemitauError], tuple[Problem, ...]]:
        # An exception is pickled with its text alone; this one would lose its problems on the way from a worker.
        return type(self), self.problems


class InputError(SemitauError):
    """What the user gave is wrong: study file, template file, data, options. Exit status 2."""

    status = 2


class RunError(SemitauError):
    """The work could not be finished: no space, no permission, a fit that does not converge. Exit status 1."""
