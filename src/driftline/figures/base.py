"""What every figure of the gallery has in common."""

from __future__ import annotations

from abc import ABC, abstractmethod
from typing import TYPE_CHECKING, ClassVar

from matplotlib.figure import Figure

if TYPE_CHECKING:
    from driftline.analysis import Analysis


class Drawing(ABC):
    """One figure of the report: its file name, width in inches, caption, and how it is drawn."""

    name: ClassVar[str]
    width: ClassVar[float]

    @abstractmethod
    def caption(self, analysis: Analysis) -> str:
        """What is to be seen, in a sentence or two."""

    @abstractmethod
    def draw(self, analysis: Analysis) -> Figure:
        """The finished figure."""
