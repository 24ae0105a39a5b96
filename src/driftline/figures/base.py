"""What every figure of the gallery has in common."""

from __future__ import annotations

from abc import ABC, abstractmethod
from typing import TYPE_CHECKING, ClassVar

from matplotlib.figure import Figure

from driftline.figures.style import SINGLE

if TYPE_CHECKING:
    from driftline.analysis import Analysis


class Drawing(ABC):
    """One figure of the report: its file name, caption, and how it is drawn.

    Attributes
    ----------
    name : str
        One of `driftline.figure_options.FIGURE_NAMES`.
    width : float
        Inches, unless the user asks for another width.
    effort : float
        Time that drawing takes, in units of that of an ordinary figure.
    """

    name: ClassVar[str]
    width: ClassVar[float] = SINGLE
    effort: ClassVar[float] = 1.0

    def applies(self, analysis: Analysis) -> bool:
        """Whether there is anything to show; a figure without is left out."""
        return True

    @abstractmethod
    def caption(self, analysis: Analysis) -> str:
        """What is to be seen, in a sentence or two."""

    @abstractmethod
    def draw(self, analysis: Analysis) -> Figure:
        """The finished figure, in the style that `driftline.figures.style.drawn_with` has set."""
