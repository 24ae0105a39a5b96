"""What tests of the page share: hostile labels, and figures drawn for it."""

from __future__ import annotations

from driftline.figures.gallery import FIGURES
from driftline.figures.style import save

ATTACK = '</script></title></style>--><script>window.harmed=1</script><img src=x onerror="window.harmed=2">\'&amp;]]>'
#: Text fields of a data file as an attacker would fill them.
HOSTILE = {
    "observable": f"gap {ATTACK}",
    "observable_symbol": f"r{ATTACK}",
    "disorder_symbol": f"W{ATTACK}",
    "disorder_unit": f"t{ATTACK}",
}


def draw(analysis, folder, *names):
    """Draw the named figures of the gallery into `folder` as SVG; returns the folder."""
    for figure in FIGURES:
        if figure.name in names:
            save(figure.draw(analysis), folder / f"{figure.name}.svg")
    return folder
