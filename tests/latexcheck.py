"""A small reader of LaTeX that finds what would not compile, for tests of what is written."""

import re

from driftline.report.latex import ALONE, WITH_ONE, WITH_TWO

#: Commands that LaTeX has by itself, and the rules of booktabs.
TEXT = {
    "textbackslash", "textasciitilde", "textasciicircum", "ss", "o", "O", "ae", "AE", "oe", "OE", "l", "L", "i", "v",
    "u", "r", "H", "c", "texttt", "cite", "mbox", "begin", "end", "toprule", "midrule", "bottomrule", "multicolumn",
}  # fmt: skip
MATHEMATICS = {*ALONE, *WITH_ONE.values(), *WITH_TWO.values(), "mbox"}
SYMBOLS = set("\\{}$&#_%,;:! `'^~=.\"\n")  # what may follow a backslash by itself

_TOKEN = re.compile(r"\\[A-Za-z]+|\\.|.", re.DOTALL)


class Reader:
    """Walks through the tokens with a stack of open groups, each with its mode."""

    def __init__(self):
        self.faults, self.stack = [], []
        self.scripts = [""]  # indices that the last atom carries, for each open group
        self.next_mode, self.argument = None, False

    @property
    def mathematical(self):
        """Whether mathematics is set here."""
        return bool(self.stack) and self.stack[-1][1]

    def open(self, kind, mathematical):
        """A group begins."""
        self.stack.append((kind, mathematical))
        self.scripts.append("")

    def close(self, kind):
        """A group ends, which must be the innermost one."""
        if not self.stack or self.stack[-1][0] != kind:
            self.faults.append(f"{kind} is closed out of turn")
            return
        self.stack.pop()
        self.scripts.pop()

    def read(self, token):
        """One token."""
        is_argument, self.argument = self.argument, False
        mode, self.next_mode = self.next_mode, None
        if token == "$":
            inner = self.stack and self.stack[-1][0] == "$"
            self.close("$") if inner else self.open("$", True)
        elif token == "{":
            self.scripts[-1] = self.scripts[-1] if is_argument else ""
            self.open("{", self.mathematical if mode is None else mode)
        elif token == "}":
            self.close("{")
        elif token in "_^":
            self.index(token)
        else:
            self.atom(token)
            if not is_argument and not token.isspace():
                self.scripts[-1] = ""

    def index(self, token):
        """A sub- or superscript: only in mathematics, one of each kind at an atom."""
        if not self.mathematical:
            self.faults.append(f"{token} outside of mathematics")
        if token in self.scripts[-1]:
            self.faults.append(f"two {token} at one atom")
        self.scripts[-1] += token
        self.argument = True

    def atom(self, token):
        """A character or a command."""
        if token in ("#", "%") or (token == "&" and self.stack):
            self.faults.append(f"bare {token}")
        if not token.startswith("\\"):
            return
        name = token[1:]
        known = (MATHEMATICS if self.mathematical else TEXT) if name.isalpha() else SYMBOLS
        if name not in known:
            self.faults.append(f"unknown command {token}")
        self.next_mode = False if name == "mbox" else None


def faults(text):
    """What is wrong with a piece of LaTeX, comments aside; empty if nothing is."""
    reader = Reader()
    for token in _TOKEN.findall(re.sub(r"^%.*\n", "", text, flags=re.MULTILINE)):
        reader.read(token)
    return reader.faults + [f"{kind} is not closed" for kind, _ in reader.stack]
