"""What every writer of output has in common."""

from __future__ import annotations

from abc import ABC, abstractmethod
from pathlib import Path
from typing import TYPE_CHECKING, ClassVar

if TYPE_CHECKING:
    from driftline.analysis import Analysis


class Writer(ABC):
    """Writes one kind of output of an analysis into a folder.

    `title` says in a few words what is written; it is shown as progress.
    """

    title: ClassVar[str]

    @abstractmethod
    def write(self, analysis: Analysis, folder: Path) -> None:
        """Write into `folder`, which exists."""
