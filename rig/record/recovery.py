"""What a session says of itself that was not sealed from a whole journal.

`/recovered` is JSON: {"ended": whether the end record was there, "rows_behind": rows taken in behind a damage,
"results_left_out": verdicts and results told behind one, "unread": [{"what", "start_byte", "end_byte",
"harmless", "torn", "records", "rows", "frames", "from_tick", "to_tick"}, ...]}. Sessions of a whole journal have none.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import asdict, dataclass
from typing import Any

PLACE = "/recovered"


@dataclass(frozen=True)
class Unread:
    """A stretch of a journal that could not be read.

    `harmless` is what a crash leaves at the end, `torn` if part of a record stands there. `records` are those
    missing by their numbers, None at the end of the file. `rows` and `frames` are lost in it, between the ticks
    `from_tick` and `to_tick`: those of the blocks before and behind it, None where there is none.
    """

    what: str
    start_byte: int
    end_byte: int
    harmless: bool = False
    torn: bool = False
    records: int | None = None
    rows: int = 0
    frames: int = 0
    from_tick: int | None = None
    to_tick: int | None = None

    @property
    def sentence(self) -> str:
        told = f"{self.what}, {_counted(self.end_byte - self.start_byte, 'byte')} not read"
        if self.records is None:
            return told
        told += f" ({_counted(self.records, 'record')} missing"
        if self.rows:
            told += f", among them {_counted(self.rows, 'row')} from tick {self.from_tick} to {self.to_tick}"
        return told + ")"


@dataclass(frozen=True)
class Recovery:
    """How a journal was found that was cut off or damaged."""

    ended: bool
    unread: tuple[Unread, ...] = ()
    rows_behind: int = 0
    results_left_out: int = 0

    @property
    def harmless(self) -> bool:
        """Whether the journal is as a crash leaves it: nothing in it was changed."""
        return all(stretch.harmless for stretch in self.unread)

    @property
    def damaged(self) -> bool:
        return not self.harmless

    @property
    def torn(self) -> bool:
        """Whether the last record was written in part: what it held is lost."""
        return any(stretch.torn for stretch in self.unread)

    @property
    def with_gap(self) -> bool:
        """Whether something is missing between events: a beginning or an end may be among it."""
        return any(stretch.records for stretch in self.unread)

    @property
    def sentence(self) -> str:
        """All of it, without a full stop, to follow the name of the session and "was"."""
        return f"recovered from a journal: {self.account}"

    @property
    def account(self) -> str:
        """How the journal was found."""
        how = [stretch.sentence for stretch in self.unread]
        if not self.ended:
            how.insert(0, "ended without an end record")
        if self.rows_behind:
            how.append(f"{_counted(self.rows_behind, 'row')} behind the damage taken in")
        if self.results_left_out:
            told = _counted(self.results_left_out, "verdict or result", "verdicts and results")
            how.append(f"{told} told behind the damage left out, as they rest on what is missing")
        return "; ".join(how)

    def to_json(self) -> dict[str, Any]:
        return asdict(self)

    @classmethod
    def from_json(cls, fields: Mapping[str, Any]) -> Recovery:
        """ValueError if the fields are not those of a recovery."""
        try:
            made = cls(
                bool(fields["ended"]),
                tuple(Unread(**stretch) for stretch in fields["unread"]),
                int(fields["rows_behind"]),
                int(fields["results_left_out"]),
            )
            _ = made.sentence
        except (KeyError, TypeError, AttributeError):
            raise ValueError("not an account of a recovery") from None
        return made


def _counted(number: int, one: str, many: str = "") -> str:
    return f"{number} {one if number == 1 else many or one + 's'}"
