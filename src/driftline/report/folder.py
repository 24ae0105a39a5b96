"""The output folder: refused early if it would overwrite something, written aside, and renamed when complete."""

from __future__ import annotations

import os
import shutil
import tempfile
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path

from driftline.errors import ConfigurationError

MARK = "result.json"  # a folder with this file in it is one of ours


def default_folder(data: Path) -> Path:
    """Folder beside the current directory's files that is named after the data file."""
    named = data if data.name else data.resolve()  # "." has no name
    return Path(f"{named.stem or named.name}-driftline")


def check_folder(folder: Path, *, force: bool = False) -> None:
    """See that `folder` may be written; meant to be called before a long computation.

    Raises
    ------
    ConfigurationError
        If `folder` is in the way, its parent is missing or cannot be written, or `force` would delete something
        that is not an output folder.
    """
    parent = folder.absolute().parent
    if not parent.is_dir():
        raise ConfigurationError(f"{parent}: is not a folder, so the output cannot be put there; make it first")
    if not os.access(parent, os.W_OK):
        raise ConfigurationError(f"{parent}: cannot be written to; choose another place with --out")
    if folder.is_symlink() or (folder.exists() and not folder.is_dir()):
        raise ConfigurationError(f"{folder}: exists and is not a folder; choose another place with --out")
    if not folder.exists() or not any(folder.iterdir()):
        return
    if not force:
        raise ConfigurationError(f"{folder}: is not empty; give --force to replace it or choose another with --out")
    if not (folder / MARK).is_file():
        raise ConfigurationError(
            f"{folder}: holds no {MARK}, so it is not an output folder and --force does not delete it; "
            "choose another place with --out"
        )


@contextmanager
def output_folder(folder: Path, *, force: bool = False) -> Iterator[Path]:
    """A new folder to write into, which takes the name `folder` when the block ends without an error.

    Whatever goes wrong, interruption included, the unfinished folder is removed and an old one stays as it was.

    Raises
    ------
    ConfigurationError
        As `check_folder`, before and again after the block; also if the system refuses to write.
    """
    check_folder(folder, force=force)
    target = folder.absolute()
    try:
        unfinished = Path(tempfile.mkdtemp(prefix=f".{target.name}.", suffix=".part", dir=target.parent))
    except OSError as reason:
        raise ConfigurationError(f"{target.parent}: cannot be written to ({reason.strerror})") from reason
    try:
        unfinished.chmod(0o777 & ~_umask())  # mkdtemp keeps others out; an ordinary folder follows the umask
        yield unfinished
        check_folder(folder, force=force)
        _put_in_place(unfinished, target)
    except OSError as reason:
        raise ConfigurationError(f"{folder}: cannot be written ({reason.strerror or reason})") from reason
    finally:
        shutil.rmtree(unfinished, ignore_errors=True)


def _put_in_place(finished: Path, target: Path) -> None:
    """Two renames: at no moment does an incomplete folder carry the final name."""
    if not target.exists():
        finished.rename(target)
        return
    old = Path(tempfile.mkdtemp(prefix=f".{target.name}.", suffix=".old.part", dir=target.parent))
    try:
        target.rename(old)  # onto an empty folder, which POSIX allows
        try:
            finished.rename(target)
        except BaseException:
            old.rename(target)
            raise
    finally:
        shutil.rmtree(old, ignore_errors=True)


def _umask() -> int:
    mask = os.umask(0)
    os.umask(mask)
    return mask
