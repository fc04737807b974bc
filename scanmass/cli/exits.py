"""How a command ends: 0 done, 2 the user's fault or a figure declined, 3 a bug, 130 interrupted."""

from __future__ import annotations

import errno
import functools
import os
import sys
import traceback
from collections.abc import Callable
from contextlib import suppress
from pathlib import Path
from typing import ParamSpec

from scanmass.errors import UserFault
from scanmass.libraries import missing_library

DONE, USERS_FAULT, BUG, INTERRUPTED = 0, 2, 3, 130
TRACEBACK = "SCANMASS_TRACEBACK"
"""Environment variable; set to 1 it adds the traceback to the message of a bug."""

P = ParamSpec("P")


def guarded(command: Callable[P, int]) -> Callable[P, None]:
    """The command for the option parser: it ends the program with the exit code, faults printed on stderr."""

    @functools.wraps(command)
    def run(*args: P.args, **kwargs: P.kwargs) -> None:
        import typer

        raise typer.Exit(exit_code(functools.partial(command, *args, **kwargs)))

    return run


def exit_code(command: Callable[[], int]) -> int:
    """Run a command; its own exit code, or that of what went wrong."""
    try:
        code = command()
        sys.stdout.flush()
        return code
    except UserFault as fault:
        return _told(str(fault), USERS_FAULT)
    except KeyboardInterrupt:
        return _told("interrupted", INTERRUPTED)
    except BrokenPipeError:
        # Whoever read our output has had enough (`| head`). What is still buffered must not fail at exit.
        os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
        return DONE
    except Exception as fault:
        known = missing_library(fault) or _file_fault(fault) or _full(fault)
        return _told(str(known), USERS_FAULT) if known is not None else _bug(fault)


def _file_fault(fault: Exception) -> UserFault | None:
    """A file that cannot be opened, or a full disk, in words; None for anything else."""
    if isinstance(fault, OSError) and fault.filename is not None and fault.strerror is not None:
        return UserFault(fault.strerror.lower(), file=Path(os.fsdecode(fault.filename)))
    return None


def _full(fault: Exception) -> UserFault | None:
    """Results that found no room where stdout leads; None for anything else."""
    if not isinstance(fault, OSError) or fault.errno not in (errno.ENOSPC, errno.EDQUOT, errno.EFBIG):
        return None
    with suppress(OSError, ValueError):  # what is still buffered must not fail again at exit
        os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
    return UserFault(f"the result cannot be written: {os.strerror(fault.errno).lower()}", allowed="make room for it")


def _bug(fault: Exception) -> int:
    if os.environ.get(TRACEBACK, "") not in ("", "0"):
        print(traceback.format_exc(), file=sys.stderr)
    first = f"scanmass failed by a fault of its own: {type(fault).__name__}: {fault}"
    return _told(f"{first}\nPlease report it. {TRACEBACK}=1 shows where it happened.", BUG)


def _told(text: str, code: int) -> int:
    print(text, file=sys.stderr)
    return code
