"""Which version of the code was inspected, as the files of a Git checkout tell it.

SARIF ties relative URIs to a repository through ``versionControlProvenance`` (2.1.0 section 3.23). Git is not run for
it, since nothing in an inspected tree may make a program run: three small text files say enough. A remote that is no
web address, or credentials in one, never reach the log.
"""

import configparser
import os
import re
from dataclasses import dataclass
from pathlib import Path
from typing import Any
from urllib.parse import quote, urlsplit, urlunsplit

import sarif_om as om

from stepring.report.sources import CHECKOUT_BASE, ROOT_BASE

_LARGEST = 1_000_000
_REVISION = re.compile(r"[0-9a-f]{40}(?:[0-9a-f]{24})?")


@dataclass(frozen=True, slots=True)
class Checkout:
    """A checkout with a web address: ``below`` leads from its top to the inspected root, as a URI with a slash at its
    end, and is empty where they are one folder.
    """

    address: str
    revision: str | None
    branch: str | None
    below: str

    def details(self) -> Any:
        """The checkout as SARIF says it."""
        return om.VersionControlDetails(
            repository_uri=self.address,
            revision_id=self.revision,
            branch=self.branch,
            mapped_to=om.ArtifactLocation(uri_base_id=CHECKOUT_BASE if self.below else ROOT_BASE),
        )


def checkout_of(root: Path) -> Checkout | None:
    """The checkout that holds ``root``; None where there is none with a web address."""
    top = next((folder for folder in (root, *root.parents) if (folder / ".git").is_dir()), None)
    if top is None:
        return None
    git = top / ".git"
    try:
        address = _address(_text(git / "config"))
        head = _text(git / "HEAD").strip()
    except (OSError, ValueError, configparser.Error):
        return None
    if address is None:
        return None
    branch = head.removeprefix("ref: refs/heads/") if head.startswith("ref: refs/heads/") else None
    below = "" if top == root else quote(os.fsencode(root.relative_to(top)), safe="/") + "/"
    return Checkout(address, _revision(git, head), branch, below)


def _text(path: Path) -> str:
    with path.open("rb") as file:
        return file.read(_LARGEST).decode("utf-8")


def _address(config: str) -> str | None:
    """The web address of the remote ``origin`` without user and password."""
    # Git indents its settings, which to this parser would be continuation lines.
    lines = "\n".join(line.strip() for line in config.splitlines())
    parser = configparser.ConfigParser(strict=False, interpolation=None, allow_no_value=True)
    parser.read_string(lines)
    parts = urlsplit((parser.get('remote "origin"', "url", fallback="") or "").strip())
    if parts.scheme not in ("http", "https") or not parts.hostname:
        return None
    host = parts.hostname if parts.port is None else f"{parts.hostname}:{parts.port}"
    return urlunsplit((parts.scheme, host, quote(parts.path, safe="/%"), "", ""))


def _revision(git: Path, head: str) -> str | None:
    if not head.startswith("ref: "):
        return head if _REVISION.fullmatch(head) else None
    name = head.removeprefix("ref: ")
    if ".." in name.split("/") or name.startswith("/"):
        return None
    try:
        return _matching(_text(git / name).strip())
    except (OSError, ValueError):
        pass
    try:
        packed = _text(git / "packed-refs").splitlines()
    except (OSError, ValueError):
        return None
    return next((_matching(line.split(" ")[0]) for line in packed if line.endswith(" " + name)), None)


def _matching(text: str) -> str | None:
    return text if _REVISION.fullmatch(text) else None
