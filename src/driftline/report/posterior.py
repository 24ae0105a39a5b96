"""`posterior.h5`: the posterior draws of every ansatz, for whoever wants another quantile or plot."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING

from driftline.readers.write import new_hdf5
from driftline.report.base import Writer

if TYPE_CHECKING:
    from driftline.analysis import Analysis
    from driftline.partial import CollapseStudy


class PosteriorFile(Writer):
    """`posterior.h5`: a group for each ansatz with `samples`, shape (draws, parameters), and their `names`."""

    title = "posterior.h5"

    def write(self, analysis: Analysis | CollapseStudy, folder: Path) -> None:
        """Write `folder/posterior.h5`."""
        # no creation times, so that two equal runs write equal files
        with new_hdf5(folder / "posterior.h5", track_order=True) as file:
            file.attrs["schema"] = "driftline-posterior/1"
            for fit in analysis.comparison.fits:
                group = file.create_group(fit.ansatz.name, track_order=True)
                group.attrs["log_evidence"] = fit.log_evidence
                samples = group.create_dataset("samples", data=fit.samples, track_times=False)
                samples.attrs["names"] = list(fit.names)
