"""How much of a file of unknown origin is read, at most; far above what real data need."""

from __future__ import annotations

#: Numbers held in memory at once. Summaries hold hundreds, realisations of a study some millions.
MAX_NUMBERS = 10_000_000
#: Bytes, after unpacking, of a text that is read into memory: ten million rows of fifty characters.
MAX_TEXT = 500_000_000
#: Characters of a line: thousands of columns, and below the limit at which the csv module gives up on a field.
MAX_LINE = 100_000
#: Lines of a text that is read line by line, blank ones and comments included: some ten seconds.
MAX_LINES = 10_000_000
#: Columns of a text table, and its cells; each cell is a text of its own for a while, some hundred bytes. Longer lists
#: of raw values with their parameters are streamed, which has no such limit.
MAX_COLUMNS = 4096
MAX_CELLS = 5_000_000
#: Entries of folders looked at in one walk; a study has some thousands of files.
MAX_FILES = 1_000_000
#: Objects of an HDF5 file or members of an archive looked at, and attributes of one object.
MAX_OBJECTS = 200_000
#: Members of groups that were reached on another path before.
MAX_REPEATED = 10_000
#: Characters of the name of a group, dataset or array, as file systems have it; patterns are matched against names.
MAX_NAME = 255
#: Numbers of all files or arrays together that are held in memory before they are averaged: a gigabyte with copies.
MAX_HELD = 50_000_000
#: Groups inside groups.
MAX_DEPTH = 32
#: Bytes of a configuration, and dots in it: one dotted key of this length takes seconds to parse.
MAX_CONFIG = 100_000
MAX_CONFIG_DOTS = 5_000
#: Tables inside tables of a configuration.
MAX_CONFIG_DEPTH = 20
