"""The `haltere` command: one module a command, each with `main(words) -> Exit`."""

from __future__ import annotations

import os
import sys
from collections.abc import Sequence
from importlib import import_module

from rig.command.exits import CommandError, Exit
from rig.command.parser import build
from rig.problem import FileProblems
from rig.record.errors import Damaged
from rig.single_thread import keep_single


def main(words: Sequence[str] | None = None) -> int:
    """Run one command; returns its exit code. Every error is told in sentences on stderr."""
    keep_single(os.environ)
    try:
        parsed = build().parse_args(words)
        module = import_module(f"rig.command.{parsed.command.replace('-', '_')}")
        return int(module.main(parsed))
    except CommandError as error:
        _tell(str(error))
        return int(error.code)
    except Damaged as error:  # inside a column: found only when it is read
        _tell(str(error))
        return int(Exit.DAMAGED)
    except FileProblems as error:
        for problem in error.problems:
            _tell(str(problem))
        return int(Exit.USAGE)
    except KeyboardInterrupt:
        _tell("stopped by the operator")
        return int(Exit.HALTED)
    except BrokenPipeError:
        # The reader of our output went away (`haltere analyse ... | head`): nothing is left to tell.
        os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
        return int(Exit.DONE)
    except OSError as error:
        name = f"{error.filename}: " if error.filename else ""
        _tell(f"{name}{(error.strerror or str(error)).lower()}")
        return int(Exit.USAGE)


def _tell(sentence: str) -> None:
    print(f"haltere: {sentence}", file=sys.stderr)


def entry() -> None:
    """Entry point of the installed command."""
    sys.exit(main())
