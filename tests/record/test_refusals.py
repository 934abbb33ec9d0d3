"""Why a file could not be written, in one sentence, whoever told it: the system, h5py or HDF5."""

from __future__ import annotations

import errno
from pathlib import Path

import h5py
import pytest

from rig.record.errors import JournalFailure
from rig.record.refusals import refusal

#: As h5py gave it on a full disk; over two lines, the second with a pointer.
FULL = RuntimeError(
    "Can't decrement id ref count (file write failed: time = Tue Dec  1 10:00:00 2026\n, filename = '/x/a.h5', file "
    "descriptor = 5, errno = 28, error message = 'No space left on device', buf = 0x55d0, total write size = 2048)"
)


@pytest.mark.parametrize(
    ("error", "words"),
    [
        (FULL, "no space is left on the disk of {}"),
        (OSError(errno.ENOSPC, "No space left on device"), "no space is left on the disk of {}"),
        (OSError(f"[Errno {errno.EACCES}] Unable to create file"), "nothing may be written into {}"),
        (PermissionError(errno.EPERM, "no"), "nothing may be written into {}"),
        (OSError(errno.EIO, "Input/output error"), "the disk of {} reports an error"),
        (OSError(errno.ENAMETOOLONG, "File name too long"), "file name too long"),
        (OSError(None, "what was read back differs"), "what was read back differs"),
        (RuntimeError("Something (with details = 0x5)\nand more"), "Something"),
        (RuntimeError(), "RuntimeError"),
    ],
)
def test_the_words(tmp_path: Path, error: Exception, words: str) -> None:
    assert refusal(error, tmp_path / "a.h5") == words.format(tmp_path)


def test_folders_that_are_none(tmp_path: Path) -> None:
    (tmp_path / "file").write_text("", encoding="utf-8")
    for folder in (tmp_path / "nope", tmp_path / "file"):
        with pytest.raises(OSError) as caught:
            h5py.File(folder / "a.h5", "w")
        assert refusal(caught.value, folder / "a.h5") == f"{folder} is not a folder"


def test_sealing_uses_them(tmp_path: Path) -> None:
    from small_journal import write

    from rig.record.sealing import seal

    write(tmp_path / "a.journal", 2)
    with pytest.raises(JournalFailure) as caught:
        seal(tmp_path / "a.journal", tmp_path / "nope" / "a.h5")
    assert str(caught.value) == f"{tmp_path}/nope/a.h5 cannot be written: {tmp_path}/nope is not a folder"
