"""How much of a file of unknown origin is read, at most; far above what real data need."""

from __future__ import annotations

#: Numbers held in memory at once. Summaries hold hundreds, realisations of a study some millions.
MAX_NUMBERS = 10_000_000
#: Bytes, after unpacking, of a text that is read into memory: ten million rows of fifty characters.
MAX_TEXT = 500_000_000
#: Characters of a line: thousands of columns, and below the limit at which the csv module gives up on a field.
MAX_LINE = 100_000
#: Entries of folders looked at in one walk; a study has some thousands of files.
MAX_FILES = 1_000_000
#: Objects of an HDF5 file or members of an archive looked at, and attributes of one object.
MAX_OBJECTS = 200_000
#: Members of groups that were reached on another path before.
MAX_REPEATED = 10_000
#: Groups inside groups.
MAX_DEPTH = 32
#: Bytes of a configuration, and dots in it: one dotted key of this length takes seconds to parse.
MAX_CONFIG = 100_000
MAX_CONFIG_DOTS = 5_000
#: Tables inside tables of a configuration.
MAX_CONFIG_DEPTH = 20
