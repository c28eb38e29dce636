"""The one place where errors become messages and exit statuses: 0 fine, 1 the work failed, 2 bad input."""

from __future__ import annotations

import os
import signal
import sys
import threading
import traceback
from collections.abc import Callable

import click
from semitau.core.errors import Problem, SemitauError

DEVELOPER = "SEMITAU_TRACEBACK"
"""Environment variable: set to 1, every error also shows its traceback."""


def exit_status(work: Callable[[], object]) -> int:
    """Do `work`; print on stderr what stopped it, if anything; return the exit status.

    A status returned by `work` (an int) is passed on. SIGTERM ends the work as Ctrl-C does, so that half-written files
    are removed.
    """
    if threading.current_thread() is threading.main_thread():
        signal.signal(signal.SIGTERM, signal.default_int_handler)
    try:
        done = work()
        sys.stdout.flush()
        return done if isinstance(done, int) else 0
    except click.exceptions.Exit as stop:
        return stop.exit_code
    except click.ClickException as error:
        error.show()
        return error.exit_code
    except SemitauError as error:
        _tell(*error.problems)
        _tell_developer()
        return error.status
    except (KeyboardInterrupt, click.Abort):
        # The shell's "^C" stands on the line: start a new one.
        click.echo(err=True)
        _tell(Problem("stopped on request", remedy="Files that were finished are whole; the rest is as it was."))
        return 1
    except BrokenPipeError:
        # The reader of our output (head, less) has gone. Python would complain again when it flushes at exit.
        os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
        return 1
    except OSError as error:
        _tell(_translated(error))
        _tell_developer()
        return 1
    except MemoryError:
        _tell(Problem("the memory is full", remedy="Use fewer workers (--workers), or fewer bins and variations."))
        _tell_developer()
        return 1
    except Exception as error:
        _tell(_own_fault(error))
        _tell_developer()
        return 1


def _tell(*problems: Problem) -> None:
    for problem in problems:
        click.secho("semitau: ", nl=False, fg="red", bold=True, err=True)
        click.echo(str(problem), err=True)


def _tell_developer() -> None:
    if os.environ.get(DEVELOPER, "") not in ("", "0"):
        traceback.print_exc()


def _translated(error: OSError) -> Problem:
    """The operating system's refusal as a problem. Writing goes through `whole_files`, so this is mostly reading."""
    reason = os.strerror(error.errno).lower() if error.errno else str(error)
    where = os.fspath(error.filename) if isinstance(error.filename, str | os.PathLike) else ""
    return Problem(reason, where=where, remedy="Check the path and its permissions, and the space left on the disk.")


def _own_fault(error: Exception) -> Problem:
    place = traceback.extract_tb(error.__traceback__)[-1]
    first_line = (str(error).splitlines() or [""])[0]
    return Problem(
        f"stopped by a fault of its own: {type(error).__name__}: {first_line}",
        where=f"{os.path.basename(place.filename)}:{place.lineno}",
        remedy=f"Please report this line, the command and the study file; {DEVELOPER}=1 adds details.",
    )
