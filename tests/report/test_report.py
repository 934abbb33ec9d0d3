"""The report as a file: complete, self-contained, escaped."""

import re
from dataclasses import replace
from html.parser import HTMLParser
from pathlib import Path

import numpy as np
import pytest
from invented_session import Invented, Stream, rig

from rig.report import Provenance, write_report
from rig.results import Boundary, Finding, LevelResult, Measured, SessionResult, Theory
from rig.steps import Protocol

SECTIONS = (
    "verdict",
    "cautions",
    "map",
    "tap-fits",
    "course",
    "levels",
    "taps",
    "interlocks",
    "doubts",
    "methods",
    "rig",
    "provenance",
)
VOID = {"meta", "br", "link", "img", "hr", "input", "use", "path", "rect"}


class Outline(HTMLParser):
    """Ids, text outside style and drawings, and whether tags nest properly."""

    def __init__(self) -> None:
        super().__init__()
        self.ids: list[str] = []
        self.words: list[str] = []
        self.open: list[str] = []
        self.wrong: list[str] = []

    def handle_starttag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        self.ids += [value for name, value in attrs if name == "id" and value]
        if tag not in VOID:
            self.open.append(tag)

    def handle_startendtag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        self.ids += [value for name, value in attrs if name == "id" and value]

    def handle_endtag(self, tag: str) -> None:
        if tag in VOID:
            return
        if not self.open or self.open.pop() != tag:
            self.wrong.append(tag)

    def handle_data(self, data: str) -> None:
        if "style" not in self.open and "svg" not in self.open:
            self.words.append(data)

    @property
    def text(self) -> str:
        return " ".join(" ".join(self.words).split())


def outline(page: str) -> Outline:
    found = Outline()
    found.feed(page)
    found.close()
    return found


def written(path: Path, session: Invented, **changes: object) -> str:
    write_report(path, **{**session.arguments(), **changes})  # type: ignore[arg-type]
    return path.read_text(encoding="utf-8")


@pytest.fixture(scope="module")
def page(tmp_path_factory: pytest.TempPathFactory, short_session: Invented) -> str:
    return written(tmp_path_factory.mktemp("report") / "report.html", short_session)


def test_all_sections_are_there_once(page: str) -> None:
    ids = outline(page).ids
    assert [ids.count(section) for section in SECTIONS] == [1] * len(SECTIONS)
    assert len(ids) == len(set(ids)), "ids repeat, so references within the drawings could go astray"


def test_tags_nest(page: str) -> None:
    found = outline(page)
    assert found.wrong == []
    assert found.open == []


def test_nothing_is_fetched_from_anywhere(page: str) -> None:
    for sign in ("http:", "https:", "//", "src=", "@import", "<script", "<link", "javascript:"):
        assert sign not in page, sign
    references = re.findall(r'href="([^"]*)"', page) + re.findall(r"url\(([^)]*)\)", page)
    assert references
    assert all(reference.startswith("#") for reference in references)
    ids = set(outline(page).ids)
    assert {reference[1:] for reference in references} <= ids


def test_four_drawings_with_a_description(page: str) -> None:
    assert len(re.findall(r'<svg role="img" aria-label="[^"]{20,}"', page)) == 4


def test_file_is_small(page: str) -> None:
    assert len(page.encode()) < 3_000_000


def test_same_session_same_bytes(tmp_path: Path, short_session: Invented, page: str) -> None:
    assert written(tmp_path / "again.html", short_session) == page


def test_foreign_words_are_shown_as_text(tmp_path: Path, short_session: Invented) -> None:
    nasty = '<script>alert("x")</script> & <img src=x>'
    session = replace(short_session)
    bad_rig = replace(rig(nasty), context={"operator": nasty, nasty: "y"}, text=nasty)
    taps = tuple(replace(tap, reason=nasty, accepted=False) for tap in session.result.taps)
    levels = tuple(replace(level, reason=nasty) for level in session.result.levels)
    result = replace(session.result, taps=taps, levels=levels, remarks=(nasty,))
    page = written(
        tmp_path / "nasty.html",
        session,
        rig=bad_rig,
        result=result,
        protocol=Protocol(nasty, nasty, (), text=nasty),
        provenance=Provenance(session_name=nasty, software={nasty: nasty}),
    )
    assert "<script" not in page
    assert "<img" not in page
    assert outline(page).text.count("alert(") >= 8
    assert "<title>Stability report: &lt;script&gt;" in page


def test_verdict_and_its_numbers_are_told(page: str) -> None:
    text = outline(page).text
    for phrase in (
        "Simulated rig: no physical board was involved.",
        "25.876 Hz",
        "25.829 to 25.923",
        "Not testable",
        "without the clamped control",
        "inside the 95 % interval",
        "A tap of 2e-4 N m s is lost",
        "60 V DC, ripple-free and dry",
        "ab" * 32,
    ):
        assert phrase in text, phrase


def test_missing_values_are_named(tmp_path: Path, short_session: Invented) -> None:
    bare_rig = replace(short_session.rig, mechanism=None, context={}, sha256="", text="")
    level = LevelResult(
        "falling", Measured(7.0), *[Measured()] * 6, taps=0, returned=0, regime="undetermined", state="lost",
        reason="nothing recorded",
    )  # fmt: skip
    result = replace(
        short_session.result,
        levels=(level,),
        taps=(),
        falling=Boundary("not_located", reason="one level only"),
        theory=Theory(),
    )
    page = written(
        tmp_path / "bare.html",
        short_session,
        rig=bare_rig,
        result=result,
        provenance=Provenance(),
        theory=None,
    )
    text = outline(page).text
    assert "operator not known specimen not known" in text
    assert "its SHA-256 not known" in text
    assert "Not known; theory is not testable." in text
    assert "None" not in text
    assert "nan" not in re.findall(r"[a-z]+", text)
    assert text.count("not known") > 12


def test_empty_session_still_gives_a_report(tmp_path: Path, short_session: Invented) -> None:
    none = Finding("not_testable", "no level was held")
    nowhere = Boundary("not_located", reason="no level was visited")
    empty = SessionResult((), (), nowhere, nowhere, none, none, none, Theory())
    streams = Stream(
        np.zeros(0), np.zeros(0, dtype=np.uint64), {name: np.zeros(0) for name in short_session.streams}
    )
    page = written(
        tmp_path / "empty.html", short_session, result=empty, streams=streams, events=[], theory=None
    )
    found = outline(page)
    assert set(SECTIONS) <= set(found.ids)
    for phrase in (
        "No level was measured: there is no verdict.",
        "No tap was given.",
        "No tap of this session could be fitted.",
        "No statement of this session rests on a 95 % interval.",
    ):
        assert phrase in found.text, phrase


def test_rig_without_crank_or_voltage_channel(tmp_path: Path, short_session: Invented) -> None:
    body_only = replace(short_session.rig, channels=short_session.rig.channels[:1])
    page = written(tmp_path / "body.html", short_session, rig=body_only)
    assert set(SECTIONS) <= set(outline(page).ids)


def test_trip_is_told_with_its_sentence(tmp_path: Path, short_session: Invented) -> None:
    from rig.events import Event

    sentence = "Motor current 6.31 A exceeded 6.00 A at 12.345 s; drive off (coast)."
    trip = Event(
        short_session.events[3].tick, "trip", {"cause": "current", "sentence": sentence, "halt": "coast"}
    )
    page = written(tmp_path / "trip.html", short_session, events=[*short_session.events, trip])
    assert sentence in outline(page).text
    assert "The run was halted by an interlock." in outline(page).text


def test_failed_write_leaves_no_file(tmp_path: Path, short_session: Invented) -> None:
    with pytest.raises(OSError):
        written(tmp_path / "no" / "such" / "report.html", short_session)
    assert list(tmp_path.iterdir()) == []
