"""What is prepared, without a window: files opened, edited and kept; names; what is missing; the job."""

from __future__ import annotations

import stat
from pathlib import Path

import pytest
from preparing import NOON, NOON_S, shipped

from rig.desk.model.checked import MOST_TOLD, check, forecast_sentences, problem_sentence, time_words
from rig.desk.model.prepared import (
    Prepared,
    address_problem,
    free_name,
    session_folder,
    session_name,
    session_problem,
    stamp,
)
from rig.desk.model.written_file import NotKept, NotOpened, WrittenFile, kind_of, opened, shipped_of
from rig.files.lines import LARGEST_BYTES
from rig.run.cautions import Acknowledgement

RIG, PROTOCOL = shipped("boom"), shipped("quick")


@pytest.fixture
def prepared(tmp_path: Path) -> Prepared:
    return Prepared(WrittenFile.open("boom"), WrittenFile.open("quick"), tmp_path)


# -- files ---------------------------------------------------------------------------------------------


def test_shipped_files_are_told_apart_by_kind() -> None:
    rigs, protocols = shipped_of("rig"), shipped_of("protocol")
    assert {"boom", "column"} <= set(rigs) and {"quick", "first-sweep"} <= set(protocols)
    assert not set(rigs) & set(protocols)
    assert kind_of("# haltere_rig = 1\n") == ""


def test_a_shipped_name_is_the_shipped_file_whatever_lies_here(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.chdir(tmp_path)
    (tmp_path / "boom").write_text("# another\n", encoding="utf-8")
    assert WrittenFile.open("boom").shipped
    file = WrittenFile.open(str(tmp_path / "boom"))
    assert not file.shipped and file.source == str(tmp_path / "boom")


def test_a_shipped_file_is_never_written() -> None:
    file = WrittenFile.open("quick")
    before = file.path.read_bytes()
    file.edit(file.text + "# mine\n")
    assert file.shipped and file.edited and file.name == "quick"
    with pytest.raises(NotKept, match="comes with Haltere"):
        file.save()
    with pytest.raises(NotKept, match="another folder"):
        file.save_as(file.path.with_name("other.toml"))
    assert file.path.read_bytes() == before and not file.path.with_name("other.toml").exists()


def test_it_is_saved_under_another_name_and_then_has_it(tmp_path: Path) -> None:
    file = WrittenFile.open("quick")
    file.edit(file.text + "# mine\n")
    file.save_as(tmp_path / "mine.toml")
    assert (file.name, file.edited, file.shipped) == ("mine.toml", False, False)
    assert (tmp_path / "mine.toml").read_text(encoding="utf-8") == PROTOCOL + "# mine\n"
    assert [found.name for found in tmp_path.iterdir()] == ["mine.toml"]  # nothing aside is left
    file.edit(file.text + "# more\n")
    file.save()
    assert (tmp_path / "mine.toml").read_text(encoding="utf-8").endswith("# more\n")


def test_a_file_changed_on_disk_meanwhile_is_not_written_over(tmp_path: Path) -> None:
    path = tmp_path / "mine.toml"
    path.write_text(PROTOCOL, encoding="utf-8")
    file = WrittenFile.open(path)
    file.edit(file.text + "# here\n")
    path.write_text(PROTOCOL + "# elsewhere\n", encoding="utf-8")
    for write in (file.save, lambda: file.save_as(path)):
        with pytest.raises(NotKept, match="changed on disk"):
            write()
    assert path.read_text(encoding="utf-8").endswith("# elsewhere\n") and file.edited
    file.save_as(tmp_path / "other.toml")
    assert not file.edited


def test_a_file_taken_away_meanwhile_is_written_anew(tmp_path: Path) -> None:
    path = tmp_path / "mine.toml"
    path.write_text(PROTOCOL, encoding="utf-8")
    file = WrittenFile.open(path)
    path.unlink()
    file.edit(file.text + "# here\n")
    file.save()
    assert path.read_text(encoding="utf-8").endswith("# here\n")


def test_line_ends_permissions_and_links_stay(tmp_path: Path) -> None:
    path, link = tmp_path / "mine.toml", tmp_path / "link.toml"
    path.write_bytes(PROTOCOL.replace("\n", "\r\n").encode())
    path.chmod(0o640)
    link.symlink_to(path)
    file = WrittenFile.open(link)
    file.edit(PROTOCOL)
    assert not file.edited  # an editor that changes line ends alone has not edited
    file.edit(PROTOCOL + "# here\n")
    file.save()
    assert path.read_bytes() == (PROTOCOL + "# here\n").replace("\n", "\r\n").encode()
    assert stat.S_IMODE(path.stat().st_mode) == 0o640 and link.is_symlink()


def test_what_cannot_be_opened_or_kept_is_a_sentence(tmp_path: Path) -> None:
    (tmp_path / "latin.toml").write_bytes(b"# caf\xe9\n")
    for name, words in ((tmp_path / "none.toml", "expected a file"), (tmp_path / "latin.toml", "UTF-8")):
        with pytest.raises(NotOpened, match=words):
            WrittenFile.open(name)
    file = WrittenFile.open("quick")
    for place, words in ((tmp_path, "a folder"), (tmp_path / "none" / "a.toml", "cannot be written")):
        with pytest.raises(NotKept, match=words):
            file.save_as(place)
    file.edit("# \ud800\n")
    with pytest.raises(NotKept, match="UTF-8"):
        file.save_as(tmp_path / "a.toml")
    assert not (tmp_path / "a.toml").exists()


def test_a_remembered_file_that_is_gone_gives_way_to_the_shipped_one(tmp_path: Path) -> None:
    file, why = opened(str(tmp_path / "gone.toml"), "boom")
    assert file.name == "boom" and "gone.toml" in why
    assert opened("", "boom")[1] == ""


# -- checks --------------------------------------------------------------------------------------------


def test_a_good_pair_has_a_dry_run() -> None:
    found = check(RIG, "boom", PROTOCOL, "quick")
    assert found.good and found.problem_count == 0 and found.crossings == ()
    assert found.is_of(RIG, PROTOCOL) and not found.is_of(RIG + "\n", PROTOCOL)
    assert found.forecast is not None and len(found.forecast.levels) == 6
    told = " ".join(forecast_sentences(found.forecast))
    assert "off does not mean stopped" in told and "Top flap rate" in told and "Winding" in told


def test_problems_of_both_files_come_at_once_with_their_lines() -> None:
    rig = RIG.replace('current = "6 A"', 'current = "6 V"')
    protocol = PROTOCOL.replace('order = "rising"', 'order = "sideways"')
    found = check(rig, "r.toml", protocol, "p.toml")
    assert not found.good and found.forecast is None and found.problem_count == 2
    (one,), (other,) = found.rig_problems, found.protocol_problems
    assert rig.split("\n")[one.line - 1] == 'current = "6 V"' and one.key == "limits.current"
    assert protocol.split("\n")[other.line - 1] == 'order = "sideways"'
    assert problem_sentence(one).startswith(f'line {one.line}, limits.current = "6 V": expected ')


def test_limits_the_protocol_would_cross_are_told() -> None:
    rig = RIG.replace('flap_rate = "60 Hz"', 'flap_rate = "30 Hz"')
    found = check(rig, "boom", PROTOCOL, "quick")
    assert found.good and found.crossings and all("above 30 Hz" in words for words in found.crossings)


@pytest.mark.parametrize(
    ("text", "words"),
    [
        ("# \ud800\n", "UTF-8"),
        ("#" * (LARGEST_BYTES + 1), "1 MiB"),
        ("rubbish ]] = [", "TOML"),
        ("", "haltere_rig"),
        (PROTOCOL, "this is a protocol"),
    ],
)
def test_rubbish_is_told_not_raised(text: str, words: str) -> None:
    found = check(text, "r.toml", PROTOCOL, "quick")
    assert not found.good and any(words in str(problem) for problem in found.rig_problems)


def test_of_very_many_problems_the_rest_is_counted() -> None:
    text = RIG + "".join(f"[unknown{number}]\n" for number in range(MOST_TOLD + 30))
    found = check(text, "r.toml", PROTOCOL, "quick")
    assert len(found.rig_problems) == MOST_TOLD and found.untold == 30
    assert found.problem_count == MOST_TOLD + 30


def test_durations_are_said_as_people_say_them() -> None:
    assert [time_words(s) for s in (40.2, 99.4, 100.0, 5940.0, 12_000.0)] == [
        "40 s",
        "99 s",
        "2 min",
        "99 min",
        "3 h 20 min",
    ]


# -- names and places ----------------------------------------------------------------------------------


def test_a_session_is_named_after_rig_protocol_and_time() -> None:
    assert stamp("2025-03-01T09:05:07+00:00") == "20250301-090507"
    assert session_name("boom", "quick", NOON) == "boom-quick-20250301-120000.h5"
    assert session_name("a/b c", "..", NOON) == "a-b-c-protocol-20250301-120000.h5"
    longest = session_name("ä" * 60, "名" * 60, NOON)
    assert len(longest.encode()) < 200


def test_a_name_that_is_taken_gets_a_number(tmp_path: Path) -> None:
    assert free_name(tmp_path, "a.h5") == "a.h5"
    (tmp_path / "a.h5").touch()
    (tmp_path / "a-2.journal").touch()  # of a run that broke off
    assert free_name(tmp_path, "a.h5") == "a-3.h5"


def test_a_session_that_cannot_be_is_told_why(tmp_path: Path) -> None:
    (tmp_path / "a.h5").touch()
    (tmp_path / "b.journal").touch()
    assert session_problem(tmp_path / "new.h5") == ""
    for name, words in (
        ("a.h5", "is there already"),
        ("b.h5", "journal of an earlier run"),
        ("new.txt", "ends in .h5"),
        (".h5", "ends in .h5"),
        ("none/new.h5", "folder"),
        ("x" * 300 + ".h5", "cannot have this name"),
        ("\0.h5", "cannot have this name"),
    ):
        assert words in session_problem(tmp_path / name), name


def test_sessions_go_where_the_last_one_went(tmp_path: Path) -> None:
    assert session_folder(str(tmp_path)) == tmp_path
    assert session_folder(str(tmp_path / "gone")).is_dir()


def test_an_address_is_looked_at_before_it_is_opened() -> None:
    assert address_problem("/dev/ttyACM0") == address_problem("COM3") == ""
    assert address_problem("socket://host:5000") == ""
    for address in ("", "  ", "socket://host", "socket://:5000", "socket://host:99999", "http://host:80"):
        assert address_problem(address), address


# -- what is missing, and the job ----------------------------------------------------------------------


def test_nothing_is_armed_before_it_is_checked(prepared: Prepared) -> None:
    assert prepared.missing(NOON, None, although=False) == ["The files are being checked."]
    prepared.check()
    assert prepared.missing(NOON, None, although=False) == [] and not prepared.powered


def test_a_check_that_comes_late_is_left_out(prepared: Prepared) -> None:
    first = prepared.changed()
    checked = check(*prepared.question())
    second = prepared.changed()
    assert not prepared.take(first, checked) and prepared.checked is None
    assert prepared.take(second, checked) and prepared.checked is checked


def test_a_powered_run_needs_the_cautions_acknowledged(prepared: Prepared) -> None:
    prepared.by_port, prepared.port = True, "/dev/ttyACM0"
    prepared.check()
    (missing,) = prepared.missing(NOON, None, although=False)
    assert prepared.powered and "acknowledged" in missing
    held = Acknowledgement("A. Person", prepared.rig_sha256, NOON_S)
    assert prepared.missing(NOON, held, although=False) == []


def test_a_limit_that_would_be_crossed_needs_an_answer(prepared: Prepared) -> None:
    prepared.rig.edit(RIG.replace('flap_rate = "60 Hz"', 'flap_rate = "30 Hz"'))
    prepared.check()
    (missing,) = prepared.missing(NOON, None, although=False)
    assert "cross a limit" in missing
    assert prepared.missing(NOON, None, although=True) == []


def test_a_rig_without_a_bench_needs_a_port(prepared: Prepared) -> None:
    prepared.rig.edit(RIG.replace('driver = "simulated"', 'driver = "none"'))
    prepared.check()
    assert any("describes no bench" in words for words in prepared.missing(NOON, None, although=False))
    prepared.by_port, prepared.port = True, "socket://host"
    assert any("no address" in words for words in prepared.missing(NOON, None, although=False))


def test_a_session_typed_is_taken_as_it_is_and_looked_at(prepared: Prepared, tmp_path: Path) -> None:
    prepared.check()
    for typed, words in (("taken.h5", "already"), ("a/b.h5", "without a folder"), ("x.txt", "ends in .h5")):
        (tmp_path / "taken.h5").touch()
        prepared.session_typed = typed
        (missing,) = prepared.missing(NOON, None, although=False)
        assert words in missing
    prepared.session_typed = "mine.h5"
    assert prepared.missing(NOON, None, although=False) == []
    assert prepared.session(NOON) == tmp_path / "mine.h5"


def test_the_job_holds_what_is_asked_of_the_bench(prepared: Prepared, tmp_path: Path) -> None:
    prepared.rig.edit(RIG + "# edited, in no file\n")
    prepared.check()
    job = prepared.job(NOON, NOON_S, software="haltere 0", state_folder="/state", ring="/ring")
    assert job.out == str(tmp_path / "boom-quick-20250301-120000.h5")
    assert (job.rig_text, job.protocol_text) == (RIG + "# edited, in no file\n", PROTOCOL)
    assert job.may_go_on and job.pictures and (job.ring, job.state_folder) == ("/ring", "/state")
    assert (job.created_utc, job.created_utc_s, job.software) == (NOON, NOON_S, "haltere 0")
    assert (job.port, job.acknowledged_by) == ("", "") and job.rig().simulated
    prepared.by_port, prepared.port = True, " /dev/ttyACM0 "
    job = prepared.job(NOON, NOON_S, software="", state_folder="", acknowledged_by="A. Person")
    assert (job.port, job.acknowledged_by) == ("/dev/ttyACM0", "A. Person")
    assert job.rig().driver == "board" and job.protocol(job.rig()).name == "quick"
