"""The part of the consistency checks that looks at places: URIs, regions, and the text that they claim to show.

Section numbers are those of SARIF 2.1.0.
"""

import base64
import re
from collections.abc import Iterator, Mapping
from pathlib import Path
from typing import Any
from urllib.parse import unquote_to_bytes

# RFC 3986: unreserved, sub-delimiters and percent-encoded bytes in a path; a scheme may come first.
_URI = re.compile(r"(?:[A-Za-z][A-Za-z0-9+.-]*:)?(?:[A-Za-z0-9\-._~!$&'()*+,;=:@/]|%[0-9A-Fa-f]{2})+")
_SCHEME = re.compile(r"[A-Za-z][A-Za-z0-9+.-]*:")


def place_key(location: Mapping[str, Any]) -> tuple[Any, Any]:
    """What tells one artifact location from another."""
    return location.get("uriBaseId"), location.get("uri")


def check_place(place: Mapping[str, Any], run: Mapping[str, Any], path: str) -> Iterator[str]:
    """The breaches in a physical location."""
    location = place.get("artifactLocation", {})
    yield from _check_uri(location, run, path)
    index, artifacts = location.get("index"), run.get("artifacts", [])
    if index is not None:
        if not 0 <= index < len(artifacts):
            yield f"{path}: the artifact index {index} leads nowhere (3.4)."
        elif place_key(artifacts[index].get("location", {})) != place_key(location):
            yield f"{path}: index and URI name different artifacts (3.4)."
    region, context = place.get("region"), place.get("contextRegion")
    for name, one in (("region", region), ("contextRegion", context)):
        if one is not None:
            yield from _check_region(one, f"{path}.{name}")
    if context is not None and region is None:
        yield f"{path}: a context without a region (3.29.5)."
    if context is not None and region is not None and not _wider(context, region):
        yield f"{path}: the context is not wider than the region (3.29.5)."


def _check_uri(location: Mapping[str, Any], run: Mapping[str, Any], path: str) -> Iterator[str]:
    uri, base = location.get("uri"), location.get("uriBaseId")
    if base is not None and base not in run.get("originalUriBaseIds", {}):
        yield f"{path}: the URI base {base!r} is not defined (3.14.14)."
    if uri is None:
        return
    if not _URI.fullmatch(uri):
        yield f"{path}: {uri!r} is no URI reference (3.10, RFC 3986)."
    absolute = _SCHEME.match(uri) is not None
    if absolute == (base is not None):
        yield f"{path}: a relative URI needs a base, an absolute one has none (3.4.4)."
    if ".." in uri.split("/"):
        yield f"{path}: {uri!r} steps upwards (3.4)."
    if not absolute and uri.startswith("/"):
        yield f"{path}: {uri!r} is not relative to its base (3.4.4)."


def _check_region(region: Mapping[str, Any], path: str) -> Iterator[str]:
    if not any(name in region for name in ("startLine", "charOffset", "byteOffset")):
        yield f"{path}: has no start (3.30)."
    if any(region.get(name, 1) < 1 for name in ("startLine", "startColumn", "endLine", "endColumn")):
        yield f"{path}: lines and columns count from 1 (3.30)."
    start = (region.get("startLine", 1), region.get("startColumn", 1))
    end = (region.get("endLine", start[0]), region.get("endColumn", float("inf")))
    if end < start:
        yield f"{path}: ends before it starts (3.30)."


def _wider(context: Mapping[str, Any], region: Mapping[str, Any]) -> bool:
    """Whether the context is a proper superset of the region, as far as lines and columns tell."""
    if "startLine" not in context or "startLine" not in region:
        return True
    outer, inner = _extent(context), _extent(region)
    return outer[0] <= inner[0] and outer[1] >= inner[1] and outer != inner


def _extent(region: Mapping[str, Any]) -> tuple[tuple[int, float], tuple[int, float]]:
    start = (region["startLine"], region.get("startColumn", 1))
    return start, (region.get("endLine", start[0]), region.get("endColumn", float("inf")))


def check_source_text(place: Mapping[str, Any], run: Mapping[str, Any], path: str, root: Path) -> Iterator[str]:
    """Whether regions lie inside the file below ``root``, and snippets say what the file says there."""
    location = place.get("artifactLocation", {})
    base = run.get("originalUriBaseIds", {}).get(location.get("uriBaseId"), {})
    if _SCHEME.match(base.get("uri", "")) or "uri" not in location or run.get("columnKind") != "unicodeCodePoints":
        return
    try:
        data = Path(_joined(root, location["uri"])).read_bytes()
    except (OSError, ValueError):
        return
    lines = data.decode("utf-8", "surrogateescape").removeprefix("\ufeff").split("\n")
    for name in ("region", "contextRegion"):
        region = place.get(name)
        if region is not None and "startLine" in region:
            yield from _check_snippet(region, lines, f"{path}.{name}")


def _joined(root: Path, uri: str) -> str:
    return str(root) + "/" + unquote_to_bytes(uri).decode("utf-8", "surrogateescape")


def _check_snippet(region: Mapping[str, Any], lines: list[str], path: str) -> Iterator[str]:
    first, last = region["startLine"], region.get("endLine", region["startLine"])
    count = len(lines) if lines[-1] else len(lines) - 1
    if last > count:
        yield f"{path}: the file has no line {last}."
        return
    whole = lines[last - 1].removesuffix("\r") if last < len(lines) else lines[last - 1]
    start, end = region.get("startColumn", 1), region.get("endColumn", len(whole) + 1)
    if end > len(whole) + 1 or start > len(lines[first - 1]) + 1:
        yield f"{path}: the line has no column {max(start, end)}."
    chosen = [*lines[first - 1 : last - 1], whole[: end - 1]]
    chosen[0] = chosen[0][start - 1 :]
    snippet = region.get("snippet", {})
    text = "\n".join(chosen)
    if "text" in snippet and snippet["text"] != text:
        yield f"{path}: the snippet is not what the file says."
    raw = text.encode("utf-8", "surrogateescape")
    if "binary" in snippet and base64.b64decode(snippet["binary"]) != raw:
        yield f"{path}: the snippet's bytes are not the file's."
