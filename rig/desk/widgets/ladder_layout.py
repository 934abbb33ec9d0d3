"""Where the parts of a ladder stand: plain geometry in pixels, without a toolkit.

A rung that has room shows its label, its taps and its word; where rungs are many, planned labels go first, then words,
then labels of the older rungs. Labels never overlap: blocks are spread from where their rungs are.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, field

from rig.desk.model.ladder_model import RISING, Ladder, Place, TapOnRung, spread

Box = tuple[float, float, float, float]  # left, top, width, height

#: What a rung shows, most first.
FULL, COMPACT, BARE = "full", "compact", "bare"
LABEL, DASH = "label", "dash"  # of planned ones
#: How far a rung's text may stand from it before texts are cut down, in heights of a line.
FAR = 3.0


@dataclass(frozen=True)
class Sizes:
    """Lengths everything is made of, pixels: height of a line of large and of small letters, width of a small text."""

    em: float
    small: float
    width_of: Callable[[str], float]

    @property
    def tap(self) -> float:
        return 0.62 * self.em

    @property
    def tap_line(self) -> float:
        return 0.82 * self.em

    @property
    def pitch(self) -> float:
        return 0.82 * self.em


@dataclass
class TapBox:
    """A tap and where it is drawn."""

    tap: TapOnRung
    box: Box


@dataclass
class Block:
    """One rung laid out. `rail_y` is where its flap rate is; `line_y` where its rung is drawn."""

    place: Place
    shows: str
    rail_x: float
    rail_y: float
    line_y: float
    box: Box
    labels: list[tuple[str, Box]] = field(default_factory=list)
    taps: list[TapBox] = field(default_factory=list)
    left_out: int = 0  # taps for which there is no room


@dataclass(frozen=True)
class Frame:
    """The room for rungs: left, right, top and bottom, and half the width of the axis in the middle."""

    left: float
    right: float
    top: float
    bottom: float
    half_axis: float

    @property
    def middle(self) -> float:
        return 0.5 * (self.left + self.right)

    def y(self, view: Ladder, height: float) -> float:
        """Pixel of a height on the axis, kept inside."""
        share = (height - view.low) / (view.high - view.low)
        return min(max(self.bottom - share * (self.bottom - self.top), self.top), self.bottom)


def lay_out(view: Ladder, frame: Frame, sizes: Sizes, focus: int | None = None) -> list[Block]:
    """All rungs of both rails; `focus` is a tap that must be among those shown."""
    made: list[Block] = []
    for rising in (True, False):
        places = [place for place in view.places if (place.direction == RISING) == rising]
        made.extend(_rail(places, view, frame, sizes, rising, focus))
    return made


def _rail(
    places: Sequence[Place], view: Ladder, frame: Frame, sizes: Sizes, rising: bool, focus: int | None
) -> list[Block]:
    shows = [LABEL if place.filling == "planned" else FULL for place in places]
    wanted = [frame.y(view, place.height) for place in places]
    middles = _fit(places, shows, wanted, frame, sizes)
    leader = 0.65 * sizes.em
    if rising:
        rail_x, left, right = (
            frame.middle - frame.half_axis,
            frame.left,
            frame.middle - frame.half_axis - leader,
        )
    else:
        rail_x, left, right = (
            frame.middle + frame.half_axis,
            frame.middle + frame.half_axis + leader,
            frame.right,
        )
    made = []
    for place, shown, at, middle in zip(places, shows, wanted, middles, strict=True):
        tall, anchor = _extent(shown, sizes)
        top = middle - 0.5 * tall if shown != DASH else at
        block = Block(place, shown, rail_x, at, top + anchor, (left, top, right - left, tall))
        _labels(block, sizes)
        _taps(block, sizes, focus)
        made.append(block)
    return made


def _extent(shown: str, sizes: Sizes) -> tuple[float, float]:
    """Height of a block and, from its top, where its rung is."""
    if shown == FULL:
        return 2.0 * sizes.small + sizes.tap_line + 5.0, sizes.small + 1.0 + 0.5 * sizes.tap_line
    if shown == COMPACT:
        return sizes.small + sizes.tap_line + 2.0, sizes.small + 1.0 + 0.5 * sizes.tap_line
    if shown == BARE:
        return sizes.tap_line, 0.5 * sizes.tap_line
    if shown == LABEL:
        return sizes.small + 1.0, 0.5 * sizes.small + 0.5
    return 0.0, 0.0


def _fit(
    places: Sequence[Place], shows: list[str], wanted: Sequence[float], frame: Frame, sizes: Sizes
) -> list[float]:
    """Middles of the blocks; `shows` is cut down until they fit."""
    demotions = _demotions(places, shows)
    while True:
        extents = [_extent(shown, sizes) for shown in shows]
        standing = [at for at, shown in enumerate(shows) if shown != DASH]
        middles = spread(
            [wanted[at] - extents[at][1] + 0.5 * extents[at][0] for at in standing],
            [extents[at][0] for at in standing],
            frame.top - sizes.small,
            frame.bottom + sizes.small,
        )
        if not demotions:
            break
        if middles is not None:
            # A label far from its rung is worse than none of its words; but a label is kept where it can be.
            moved = max((abs(middles[k] - wanted[at]) for k, at in enumerate(standing)), default=0.0)
            if moved <= FAR * sizes.em or demotions[0][1] == BARE:
                break
        at, shown = demotions.pop(0)
        shows[at] = shown
    made = list(wanted)
    if middles is not None:
        for at, middle in zip(standing, middles, strict=True):
            made[at] = middle
    return made


def _demotions(places: Sequence[Place], shows: Sequence[str]) -> list[tuple[int, str]]:
    """What may show less, in the order in which it does; the rung the run is at comes last."""
    planned = [at for at in reversed(range(len(places))) if shows[at] == LABEL]
    planned.sort(key=lambda at: places[at].next)
    visited = [at for at in range(len(places)) if shows[at] == FULL]
    visited.sort(key=lambda at: places[at].here)
    return [
        *((at, DASH) for at in planned if not places[at].next),
        *((at, COMPACT) for at in visited),
        *((at, DASH) for at in planned if places[at].next),
        *((at, BARE) for at in visited),
    ]


def _labels(block: Block, sizes: Sizes) -> None:
    left, top, width, _ = block.box
    if block.shows in (BARE, DASH):
        return
    place = block.place
    drive, flap = sizes.width_of(place.drive), sizes.width_of(place.flap)
    block.labels.append((place.drive, (left, top, drive, sizes.small)))
    told = place.flap
    if drive + flap + 2.0 > width:  # the unit stands over the axis
        told = told.removesuffix(" Hz")
        flap = sizes.width_of(told)
    if told and drive + flap + 2.0 <= width:
        block.labels.append((told, (left + width - flap, top, flap, sizes.small)))
    if block.shows == FULL:
        word = place.word if place.visits < 2 else f"{place.word} {place.visits}×"
        if sizes.width_of(word) > width:
            word = place.word
        room = (left, top + sizes.small + sizes.tap_line, width, sizes.small)
        block.labels.append((word, room))


def _taps(block: Block, sizes: Sizes, focus: int | None) -> None:
    """Taps from the left in the order given; where there are too many the latest, or those around the focus."""
    taps = block.place.taps
    if not taps or block.shows in (LABEL, DASH):
        return
    left, _, width, _ = block.box
    fit = max(1, int((width + sizes.pitch - sizes.tap) // sizes.pitch))
    pitch = sizes.pitch
    if len(taps) > fit:  # closer together first
        pitch = max(0.68 * sizes.em, (width - sizes.tap) / (len(taps) - 1))
        fit = max(1, int((width - sizes.tap) // pitch + 1))
    first = max(0, len(taps) - fit)
    numbers = [tap.tap for tap in taps]
    if focus in numbers:
        first = min(first, numbers.index(focus))
    shown = taps[first : first + fit]
    block.left_out = len(taps) - len(shown)
    for at, tap in enumerate(shown):
        box = (left + at * pitch, block.line_y - 0.5 * sizes.tap, sizes.tap, sizes.tap)
        block.taps.append(TapBox(tap, box))
