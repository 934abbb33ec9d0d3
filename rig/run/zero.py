"""Reading the zero: means of body angle and load with the drive off and the crank at rest."""

from __future__ import annotations

from drivers.channels import ChannelTable
from drivers.rows import RowBlock


class ZeroMeans:
    """Adds up rows; a rig without a load cell gives no load."""

    def __init__(self, channels: ChannelTable) -> None:
        self._channels = channels
        self._columns = {
            key: column
            for key, measures in (("body_rad", "body angle"), ("load_n", "vertical load"))
            if (column := channels.measuring(measures)) is not None
        }
        self._sums = dict.fromkeys(self._columns, 0.0)
        self._count = 0

    def restart(self) -> None:
        self._sums = dict.fromkeys(self._columns, 0.0)
        self._count = 0

    def add(self, block: RowBlock) -> None:
        for key, column in self._columns.items():
            self._sums[key] += float(self._channels[column].values(block.raw[:, column]).sum())
        self._count += len(block)

    def means(self) -> dict[str, float]:
        """SI means by the names of the `zero` event; empty before any row."""
        if not self._count:
            return {}
        return {key: total / self._count for key, total in self._sums.items()}
