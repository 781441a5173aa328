"""Paths as strings and as what they really are: joining, and whether one lies inside another."""

import os
from collections.abc import Sequence
from functools import lru_cache
from pathlib import Path


@lru_cache(maxsize=65536)
def joined(base: Path, path: str) -> Path:
    """An absolute path without ``.`` and, where no symbolic link makes that another file, without ``..``."""
    whole = base / path
    if ".." not in whole.parts:
        return whole
    plain = Path(os.path.normpath(whole))
    return plain if os.path.realpath(plain) == os.path.realpath(whole) else whole


def is_inside(path: Path | str, folders: Sequence[Path | str]) -> bool:
    """Whether a path, its links resolved, lies in one of the folders (or is one), their links resolved too."""
    real = os.path.realpath(path)
    for folder in folders:
        base = os.path.realpath(folder)
        if real == base or real.startswith(base.rstrip(os.sep) + os.sep):
            return True
    return False
