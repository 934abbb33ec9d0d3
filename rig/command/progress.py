"""Progress on stderr: a live line on a terminal, a line a level elsewhere."""

from __future__ import annotations

from collections.abc import Sequence
from types import TracebackType

from rich.console import Console
from rich.progress import BarColumn, Progress, TextColumn, TimeElapsedColumn

from rig.run.progress import Standing
from rig.run.runner import OperatorInput
from rig.verdicts import LevelVerdict, TapVerdict, Verdict

#: Board time between two updates of the live line.
UPDATE_S = 1.0


class RunProgress:
    """Callable as the loop's progress, usable as a context, and the operator's ear for prompts."""

    def __init__(self, duration_s: float, *, quiet: bool) -> None:
        self._console = Console(stderr=True, quiet=quiet, highlight=False)
        self._live = self._console.is_terminal and not quiet
        self._bar = Progress(
            TextColumn("{task.description}"),
            BarColumn(),
            TextColumn("{task.completed:.0f} of about {task.total:.0f} s of bench time"),
            TimeElapsedColumn(),
            console=self._console,
            disable=not self._live,
        )
        self._task = self._bar.add_task("starting", total=max(duration_s, 1.0))
        self._next_s = 0.0
        self._began: dict[int, str] = {}  # when, which way and at what drive each level began

    def __enter__(self) -> RunProgress:
        self._bar.start()
        return self

    def __exit__(
        self, kind: type[BaseException] | None, error: BaseException | None, trace: TracebackType | None
    ) -> None:
        self._bar.stop()

    def __call__(self, time_s: float, standing: Standing, verdicts: Sequence[Verdict]) -> None:
        for verdict in verdicts:
            if isinstance(verdict, TapVerdict) and not verdict.accepted and verdict.returned:
                self._console.print(f"  tap {verdict.tap} left out: {verdict.reason}")
            elif isinstance(verdict, LevelVerdict) and verdict.regime in ("stable", "unstable"):
                state = verdict.state.replace("_", " ")
                self._console.print(f"{self._began.get(verdict.level, '')}: {verdict.regime}, {state}")
        if standing.level >= 0 and standing.level not in self._began:
            self._began[standing.level] = f"{time_s:7.1f} s  {standing.direction} {standing.drive_v:.2f} V"
        if self._live and time_s >= self._next_s:
            self._next_s = time_s + UPDATE_S
            words = f"{standing.direction} {standing.drive_v:.2f} V, {standing.body or 'waiting'}"
            self._bar.update(self._task, completed=time_s, description=words)

    def inputs(self) -> Sequence[OperatorInput]:
        """Headless: nobody answers; prompts run into their own limit."""
        return ()

    def say(self, text: str) -> None:
        """Something to know, that asks for nothing."""
        self._console.print(text, markup=False, soft_wrap=True)

    def prompt(self, text: str) -> None:
        # Whatever stands in it, and a line of its own however long it is.
        self._console.print(f"  >>> {text}", markup=False, soft_wrap=True)
