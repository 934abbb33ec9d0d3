"""What a command says of a session before it prints anything of it: was it changed, was it recovered."""

from __future__ import annotations

import sys
from dataclasses import dataclass

from rig.record.digests import changed_places
from rig.record.errors import Damaged
from rig.session import Session

#: So many parts are named in a line.
NAMED = 4


@dataclass(frozen=True)
class SealState:
    """`changed` since it was sealed, as the end of a sentence that begins with the file; `recovered`, how its
    journal was found. Both "" as a rule."""

    changed: str = ""
    recovered: str = ""

    def tell(self, session: Session) -> None:
        """One sentence for each, on stderr: beside JSON on stdout nothing else may stand."""
        if self.changed:
            print(f"haltere: {session.path} {self.changed}: see haltere verify", file=sys.stderr)
        if self.recovered:
            print(f"haltere: {session.path} was {self.recovered}", file=sys.stderr)


def seal_state(session: Session) -> SealState:
    """Compare a session with its digests; every value in it is read for that."""
    recovered = session.recovered.sentence if session.recovered is not None else ""
    try:
        places = changed_places(session.path)
    except Damaged:
        return SealState("cannot be compared with its digests", recovered)
    if places is None:
        return SealState("holds no digests, nothing shows whether it is as it was sealed", recovered)
    if not places:
        return SealState("", recovered)
    named = ", ".join(place.strip("/") or "its own attributes" for place in places[:NAMED])
    more = f" and {len(places) - NAMED} more" if len(places) > NAMED else ""
    return SealState(f"is not as it was sealed ({named}{more})", recovered)
