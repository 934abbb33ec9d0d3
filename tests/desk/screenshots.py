"""Pictures of the window in every state, size and theme, to be looked at.

    .venv/bin/python tests/desk/screenshots.py FOLDER [STATE ...]

The rows are those of a session run in process; nothing is powered and nothing waits for real time.
"""

from __future__ import annotations

import os
import sys
import tempfile
from collections.abc import Callable
from pathlib import Path

os.environ.setdefault("QT_QPA_PLATFORM", "offscreen")
SIZES = {"1280x720": (1280, 720, 1.0), "1920x1080": (1920, 1080, 1.0), "3840x2160": (1920, 1080, 2.0)}
RIG, PROTOCOL = "boom", "quick"
#: Board time of the pictures of a run: two levels are done, a tap has just been fitted.
AT_S = 40.5


def demo_session(folder: Path) -> Path:
    from drivers.clock import VirtualClock
    from rig.command.sessions import run_session
    from rig.files import read_pair
    from rig.shipped import find

    rig, protocol = read_pair(find(RIG), find(PROTOCOL))
    out = folder / "boom-quick.h5"
    run_session(rig, protocol, out, VirtualClock(), pace="fast")
    return out


class Studio:
    """One window, put into one state after another."""

    def __init__(self, session: Path, folder: Path) -> None:
        from rig.desk.entry import application, window
        from rig.desk.model.replay_model import ReplayModel
        from rig.session import open_session

        self.app = application()
        self.session_path = session
        self.session = open_session(session)
        self.player = ReplayModel(self.session)
        self.window = window(folder / "config", folder / "state")
        self.window.memory.folder = str(folder)
        self.window.sounds.on = False

    def settle(self, seconds: float = 0.4) -> None:
        from PySide6.QtTest import QTest

        QTest.qWait(round(1000 * seconds))

    def live(self, at_s: float = AT_S) -> None:
        """The run page as it looks at a moment of a run."""
        from rig.desk.model.run_model import EVERYTHING
        from rig.desk.model.trace_model import StoredSource
        from rig.files.forecast import forecast

        window, player = self.window, self.player
        window.leave_replay()
        player.seek(0.0)
        player.seek(at_s)
        model = player.model
        model.phase = "running"
        model.session, model.free_bytes = "", 52_000_000_000
        model.margins = [
            {"cause": cause, "value": value, "limit": limit, "unit": unit}
            for cause, value, limit, unit in (
                ("current", 0.94, 6.0, "A"),
                ("winding", 61.0, 110.0, "degC"),
                ("voltage", 9.0, 13.0, "V"),
                ("flap_rate", 32.3, 60.0, "Hz"),
                ("travel", 9.4, 45.0, "deg"),
                ("load", 121.0, 140.0, "N"),
                ("loss", 0.0, 0.01, "1"),
            )
        ]
        if model.last_tap is not None:
            picture = player.picture(model.last_tap)
            if picture is not None:
                model.pictures[model.last_tap] = picture
        planned = forecast(player.rig, self.session.protocol).levels
        page = window.run
        page.set_replay(False)
        page._show(StoredSource(player.stream, player.rig), planned)
        page.status.set_names(player.rig.name, PROTOCOL, "/dev/ttyACM0")
        page.status.set_link(8.0, player.rig.sample_hz)
        page.refresh(model, EVERYTHING)
        window.outcome.refresh(model)
        window.pages.setCurrentWidget(window.bench)
        page.traces.tick()

    def refresh(self) -> None:
        from rig.desk.model.run_model import EVERYTHING

        self.window.run.refresh(self.player.model, EVERYTHING)
        self.window.outcome.refresh(self.player.model)

    # -- states ----------------------------------------------------------------------------------------

    def idle(self) -> None:
        self.window.leave_replay()
        self.window.pages.setCurrentWidget(self.window.start)

    def checked(self) -> None:
        self.window.pages.setCurrentWidget(self.window.prepare)
        self.settle(5.0)

    def armed(self) -> None:
        self.live(0.0)
        self.player.model.phase = "starting"
        self.refresh()

    def running(self) -> None:
        self.live()

    def prompt(self) -> None:
        self.live()
        self.player.model.take({"prompt": "tap now, upward, gently, with the rod"})
        self.refresh()

    def left_out(self) -> None:
        """The last tap has just been thrown out: why is asked."""
        self.live()
        model = self.player.model
        number = model.rungs[-1].taps[-1].tap
        words = "rejected by the operator"
        model.take({"event": {"tick": model.tick, "kind": "tap_excluded", "tap": number, "reason": words}})
        self.refresh()

    def left_out_by_hand(self) -> None:
        """The same while the next tap is called for."""
        self.left_out()
        self.player.model.take({"prompt": "tap now, upward, gently, with the rod"})
        self.refresh()

    def other_words(self) -> None:
        """The same while other words are typed."""
        self.left_out()
        why = self.window.run.prompt.why
        why.buttons[-1].click()
        self.refresh()

    def tripped(self) -> None:
        self.live()
        model = self.player.model
        words = (
            "Vertical load 141.20 N exceeded 140.00 N at 40.480 s; drive off (ramp): check the load cell and its "
            "mounting before arming again."
        )
        model.take({"event": {"tick": model.tick, "kind": "trip", "cause": "load", "sentence": words}})
        model.take({"event": {"tick": model.tick, "kind": "halt", "how": "ramp", "cause": "load"}})
        model.take({"event": {"tick": model.tick, "kind": "waiting"}})
        self.refresh()

    def finished(self) -> None:
        self.live(self.player.duration_s)
        model = self.player.model
        model.take({"done": {"exit_code": 0, "reason": "done", "session": str(self.session_path)}})
        self.refresh()

    def replay(self) -> None:
        self.window.open_replay(str(self.session_path))
        replaying = self.window.replaying
        assert replaying is not None
        replaying.play(False)
        replaying.seek(AT_S)
        self.settle(2.0)
        self.window.run.tick()


STATES = (
    "idle",
    "checked",
    "armed",
    "running",
    "prompt",
    "left_out",
    "left_out_by_hand",
    "other_words",
    "tripped",
    "finished",
    "replay",
)


def pictures(folder: Path, states: tuple[str, ...]) -> None:
    """Take them all at the scale of this process."""
    scale = float(os.environ.get("QT_SCALE_FACTOR", "1"))
    with tempfile.TemporaryDirectory() as own:
        studio = Studio(demo_session(Path(own)), Path(own))
        for name, (width, height, factor) in SIZES.items():
            if factor != scale:
                continue
            studio.window.resize(width, height)
            studio.window.show()
            for theme in ("light", "dark"):
                studio.window.set_theme(theme)
                for state in states:
                    act: Callable[[], None] = getattr(studio, state)
                    act()
                    studio.settle()
                    studio.window.run.traces.tick()
                    studio.window.grab().save(str(folder / f"{state}-{name}-{theme}.png"))
                    print(folder / f"{state}-{name}-{theme}.png", flush=True)
        studio.window.leave_replay()
        studio.window.close()
        studio.session.close()


def main() -> None:
    folder = Path(sys.argv[1] if len(sys.argv) > 1 else "screenshots")
    folder.mkdir(parents=True, exist_ok=True)
    states = tuple(sys.argv[2:]) or STATES
    if "QT_SCALE_FACTOR" in os.environ:
        pictures(folder, states)
        os._exit(0)  # as the window itself ends, see rig.desk.entry
    import subprocess

    # The scale holds for a whole process.
    for factor in sorted({factor for *_, factor in SIZES.values()}):
        environment = {**os.environ, "QT_SCALE_FACTOR": f"{factor:g}"}
        subprocess.run([sys.executable, __file__, str(folder), *states], env=environment, check=True)


if __name__ == "__main__":
    main()
