"""The ansätze that run when none is named; free of numerics, so that the command line can list them at once."""

#: A fixed and a linearly drifting critical disorder, each without and with the leading correction to scaling: the two
#: answers to "does it converge or drift away", compared on equal terms.
DEFAULT_ANSATZE = (
    "power-law",
    "power-law:corrected",
    "power-law:linear-drift",
    "power-law:linear-drift:corrected",
)
