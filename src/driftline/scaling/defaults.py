"""The ansätze that run when none is named; free of numerics, so that the command line can list them at once."""

#: Three answers on equal terms.  A transition: the two lengths of the literature with the leading correction, and the
#: plain power law that most papers fit.  A crossover that drifts away: a critical disorder that moves linearly (plain
#: and corrected, so that a correction is not mistaken for a drift) or logarithmically, the KT length on such a
#: trajectory (a form that fits well without a rival of its own kind is no evidence), and the pure ratio W/L^kappa.
#: No critical disorder at all: a length finite everywhere, and no size dependence.
DEFAULT_ANSATZE = (
    "power-law",
    "power-law:corrected",
    "kt:corrected",
    "power-law:linear-drift",
    "power-law:linear-drift:corrected",
    "power-law:log-drift",
    "kt:linear-drift:corrected",
    "size-ratio",
    "finite-length",
    "size-independent",
)
