"""What can go wrong with files of a recording; each is one sentence for the operator."""

from __future__ import annotations


class RecordError(Exception):
    """Base of all recorder errors."""


class JournalFailure(RecordError):
    """The journal cannot be written any more (disk full, folder read-only); what it holds is good."""


class NameTaken(RecordError):
    """A file of that name is there already, or in use by another run."""


class Damaged(RecordError):
    """A file is not what it should be."""
