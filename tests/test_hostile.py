"""Files made to do harm: each is read by the program under limits of memory and time, and ends in one sentence."""

from __future__ import annotations

import gzip
import os
import resource
import subprocess
import sys
import zlib
from pathlib import Path

import h5py
import numpy as np
import pytest
from hypothesis import HealthCheck, Phase, given, settings
from hypothesis import strategies as st

from driftline.cli import main
from driftline.curves import Curve, Curves
from driftline.errors import ConfigurationError, DriftlineError
from driftline.readers import read
from driftline.readers.inspection import inspect_text
from driftline.readers.pattern import Pattern
from driftline.readers.write import write_csv, write_hdf5
from driftline.report.folder import output_folder
from driftline.settings import Settings
from driftline.wording import printable

HEADER = b"size,disorder,mean,error\n"
GOOD = HEADER + b"".join(b"%d,%d,0.5,0.0%d\n" % (size, w, w) for size in (8, 12) for w in range(1, 6))
HERE = Path(__file__).parent


def sparse(path: Path, start: bytes, length: int) -> None:
    """A file of `length` bytes that takes no room: zeros after `start`."""
    with path.open("wb") as stream:
        stream.write(start)
        stream.truncate(length)


def bombs(folder: Path) -> dict[str, str]:
    """Write every hostile file into `folder`; its name with a part of the sentence that answers it."""
    answers = {}

    def file(name: str, content: bytes, answer: str) -> None:
        (folder / name).write_bytes(content)
        answers[name] = answer

    file("columns.csv", b",".join(b"c%d" % i for i in range(10**6)) + b"\n", "the line is longer than 100000")
    file("many-columns.csv", (b",".join([b"1"] * 20_000) + b"\n") * 3, "there are 20000 columns, but at most 4096")
    file("nul.csv", GOOD + b"8,6,\0,1\n", "there is a zero byte")
    file("latin.csv", "# µ\n".encode() + GOOD + "# é\n".encode("latin-1"), "is not valid UTF-8")
    packer = zlib.compressobj(9, wbits=31)
    zeros = b"".join(packer.compress(bytes(1 << 20)) for _ in range(200)) + packer.flush()
    file("zeros.csv.gz", zeros, "there is a zero byte")
    file("cut.csv.gz", gzip.compress(GOOD)[:-5], "truncated or damaged")
    file("nested.toml", b"a = " + b"[" * 40_000, "nested too deeply")
    file("digits.toml", b"seed = " + b"9" * 5000, "does not fit into 64 bits")
    file("dots.toml", b"a" + b".a" * 40_000 + b" = 1", "more than 5000 dots")
    file("large.toml", b"# " + b"x" * 200_000, "larger than 100 kB")
    for name, start, answer in (
        ("long-line.csv", b"8," * 1000, "zero byte"),
        ("huge.csv", HEADER, "larger than 500 MB"),
        ("huge.npz", b"PK\x03\x04 x.npy", "not a zip archive"),
    ):
        sparse(folder / name, start, 2 << 30 if "huge" in name else 400 << 20)
        answers[name] = answer
    with h5py.File(folder / "shape.h5", "w") as h5:
        for name in ("disorder", "mean", "error"):
            h5.create_dataset(f"curves/8/{name}", (10**12,), "f8", chunks=(1000,))
    answers["shape.h5"] = "declares 1000000000000 numbers"
    with h5py.File(folder / "names.h5", "w") as h5:
        large = h5.create_dataset("L8/W1", data=np.zeros(2_000_000), chunks=(10**6,), compression="gzip")
        for w in range(2, 500):
            h5[f"L8/W{w}"] = large
            h5[f"L9/W{w}"] = large
    answers["names.h5"] = "hold more than"
    with h5py.File(folder / "name.h5", "w") as h5:
        h5["L8/" + "a" * 50_000] = [1.0]
    answers["name.h5"] = "is longer than 255 characters"
    os.mkfifo(folder / "pipe.csv")
    os.mkfifo(folder / "pipe.toml")
    answers["pipe.csv"] = answers["pipe.toml"] = "not a regular file"
    return answers


def test_hostile_files_cost_little_and_get_one_sentence(tmp_path):
    """Within a gigabyte of memory and a minute of the processor for all together, each gets its own sentence."""
    answers = bombs(tmp_path)
    command = [sys.executable, str(HERE / "hostile.py"), *(str(tmp_path / name) for name in answers)]
    environment = {**os.environ, "PYTHONPATH": os.pathsep.join(filter(None, sys.path)), "OPENBLAS_NUM_THREADS": "1"}
    run = subprocess.run(command, capture_output=True, text=True, env=environment, check=False)
    assert (run.returncode, run.stderr) == (0, "")
    rows = [line.split("\t") for line in run.stdout.splitlines()]
    assert [row[2] for row in rows] == list(answers)
    for _, _, name, text in rows:
        assert answers[name] in text


# ---------------------------------------------------------------- what reaches the terminal and the disk


def test_nothing_in_a_file_commands_the_terminal(tmp_path, capsys):
    """Escape sequences in names, headers and labels come out written, on both streams and in every outcome."""
    good = tmp_path / "run\x1b[2J\r.csv"
    good.write_bytes(GOOD)
    bad = tmp_path / "bad\x1b]0;title\x07.csv"
    bad.write_bytes(GOOD.replace(b"mean", b"\x1b[31mmean"))
    label = tmp_path / "label.csv"
    label.write_bytes(b"# observable: \xc2\x9b31m\n" + GOOD)
    undecodable = os.fsencode(tmp_path) + b"/\xff.csv"
    Path(os.fsdecode(undecodable)).write_bytes(GOOD)
    codes = [main(["inspect", os.fsdecode(path)]) for path in (good, bad, label, undecodable)]
    assert codes == [0, 1, 1, 0]
    assert main(["inspect", str(good), "\x1b[2Jtoo much"]) == 2
    shown = capsys.readouterr()
    for text in (shown.out, shown.err):
        assert text == printable(text, keep="\n")
    assert r"run\x1b[2J\r.csv" in shown.out
    assert r"bad\x1b]0;title\x07.csv, line 1" in shown.err


def test_what_is_kept_of_a_path_can_be_written_anywhere(tmp_path):
    """The record of a file whose name is not UTF-8 is text that every file and stream takes."""
    path = os.fsdecode(os.fsencode(tmp_path) + b"/run\xff\x1b.csv")
    Path(path).write_bytes(GOOD)
    curves = read(path)
    assert curves.origin["path"].encode("utf-8").endswith(rb"run\udcff\x1b.csv")
    inspect_text(curves).encode("utf-8")


@pytest.fixture
def small_disk():
    """No file may grow beyond 1000 bytes, as on a full disk; reading and folders go on."""
    soft, hard = resource.getrlimit(resource.RLIMIT_FSIZE)
    yield lambda: resource.setrlimit(resource.RLIMIT_FSIZE, (1000, hard))
    resource.setrlimit(resource.RLIMIT_FSIZE, (soft, hard))


def test_a_full_disk_leaves_nothing_behind(tmp_path, small_disk):
    """Whatever the disk does not take ends in one sentence, and no part of it stays."""
    grid = np.arange(1.0, 301.0)
    curves = Curves([Curve(size, grid, grid, np.ones(300)) for size in (8, 12)])
    small_disk()
    for write in (write_csv, write_hdf5):
        with pytest.raises(ConfigurationError, match=r"^[^\n]*: the file cannot be written \([^\n]*\)$"):
            write(curves, tmp_path / "run.out")

    def report() -> None:
        with output_folder(tmp_path / "out") as folder:
            (folder / "part").write_bytes(bytes(500))
            (folder / "result.json").write_bytes(bytes(5000))

    with pytest.raises(ConfigurationError, match=r"cannot be written \(File too large\)"):
        report()
    assert list(tmp_path.iterdir()) == []


def test_a_pattern_cannot_take_for_ever():
    """Patterns with many stars are refused, and long names of digits are answered at once."""
    with pytest.raises(ConfigurationError, match=r"there are more than 2 \* in "):
        Pattern.of("*a*a*a*a{size}")
    pattern = Pattern.of("*{size}*{disorder}{realisation}x")
    assert pattern.match("1" * 255) is None
    assert Pattern.of("*{size}").match("L12") == {"size": "12"}  # not L1 and 2


# ---------------------------------------------------------------- anything at all


def seeds(folder: Path) -> dict[str, bytes]:
    """Files of every layout, by name: what the fuzzing below spoils."""
    folder.mkdir()
    (folder / "summary.csv").write_bytes(b"# observable: r\n" + GOOD)
    curves = read(folder / "summary.csv")
    write_hdf5(curves, folder / "own.h5")
    rows = [(size, w, n, (size * w * n) % 7) for size in (8, 12) for w in range(1, 6) for n in range(4)]
    raw = "\n".join(",".join(map(str, row)) for row in rows)
    (folder / "raw.csv").write_text(f"L,W,realisation,value\n{raw}\n")
    (folder / "blanks.dat").write_text("# size disorder mean error\n" + GOOD.decode()[25:].replace(",", "  "))
    wide = "\n".join(f"{w};0.{w};0.5;0.01;0.02" for w in range(1, 6))
    (folder / "wide.txt").write_text(f"W;L8;L12;err_L8;err_L12\n{wide}\n")
    (folder / "raw.csv.gz").write_bytes(gzip.compress((folder / "raw.csv").read_bytes(), mtime=0))
    columns = dict(zip(("size", "disorder", "realisation", "value"), np.array(rows, dtype=float).T, strict=True))
    np.savez(folder / "raw.npz", **columns)
    with h5py.File(folder / "tree.h5", "w") as file:
        for size, w, n, value in rows:
            data = file.require_dataset(f"L{size}/W{w}/r", (4,), "f8", track_times=False)
            data[n] = value
            data.attrs["h"] = w
    (folder / "settings.toml").write_text(
        'seed = 7\nwindow = [1.0, 5.0]\nansatze = ["power-law", "mine"]\n[labels]\nobservable = "r"\n[input]\n'
        'pattern = "L{size}/W{disorder}/r"\ncolumns = { size = "L" }\n[ansatz.mine]\nx = "(W - a) * L"\n'
        'hypothesis = "transition"\nparameters.a = { prior = "uniform", low = 1, high = 5 }\n'
    )
    return {path.name: path.read_bytes() for path in sorted(folder.iterdir())}


PIECES = [
    b"\0",
    b"\xff",
    b"\n",
    b"\r",
    b",",
    b"\t",
    b'"',
    b"#",
    b"nan",
    b"1e999",
    b"-",
    b"{size}",
    b"[",
    b"\x1b[",
    b"9" * 25,
    b"",
]


@st.composite
def spoiled(draw, whole: dict[str, bytes]) -> tuple[str, bytes]:
    """One of the files, with some stretches overwritten, cut out or put in, or cut short."""
    name = draw(st.sampled_from(sorted(whole)))
    content = bytearray(whole[name])
    for _ in range(draw(st.integers(1, 4))):
        start = draw(st.integers(0, len(content)))
        gone = draw(st.sampled_from([0, 1, 2, 4, 8, 40]))
        content[start : start + gone] = draw(st.sampled_from(PIECES) | st.binary(max_size=8))
    return name, bytes(content[: draw(st.integers(0, len(content)))] if draw(st.integers(0, 9)) == 0 else content)


def survives(path: Path) -> None:
    """Reading gives curves or one line of text; anything else is raised."""
    try:
        if path.suffix == ".toml":
            Settings.resolve(path)
        else:
            inspect_text(read(path)).encode("utf-8")
    except DriftlineError as fault:
        text = str(fault)
        assert text == printable(text)
        assert len(text) < 2500  # a path, a dozen names, and a sentence


def fuzz(folder: Path, examples: int, *, seeded: bool) -> None:
    """Spoil the files `examples` times."""
    whole = seeds(folder / "seeds")
    for name in whole:
        survives(folder / "seeds" / name)

    @settings(
        max_examples=examples, deadline=None, derandomize=seeded, database=None, phases=(Phase.generate, Phase.shrink),
        suppress_health_check=list(HealthCheck),
    )  # fmt: skip
    @given(file=spoiled(whole))
    def run(file: tuple[str, bytes]) -> None:
        path = folder / file[0]
        path.write_bytes(file[1])
        survives(path)

    run()


def test_spoiled_files_read_or_are_refused(tmp_path):
    """Whatever becomes of a file of any layout, the answer is curves, settings or one sentence."""
    fuzz(tmp_path, 150, seeded=True)


@pytest.mark.fuzz
def test_many_spoiled_files(tmp_path):
    """The same with other files each time, for some minutes."""
    fuzz(tmp_path, int(os.environ.get("DRIFTLINE_FUZZ", "5000")), seeded=False)
