"""The map of modules in DEVELOPERS.md: a line a module, taken from the modules' own first sentences.

``python tests/module_map.py`` writes it anew; ``tests/test_documents.py`` fails where it is out of date.
"""

import ast
from pathlib import Path

TOP = Path(__file__).resolve().parents[1]
DOCUMENT = TOP / "DEVELOPERS.md"
BEGIN, END = "<!-- map: begin -->", "<!-- map: end -->"
ROOTS = (("lint", "stepring"), ("rules", "stepring_rules"))
STAGES = ("", "gather", "read", "meaning", "values", "paths", "shapes", "report")


def first_sentence(module: Path) -> str:
    """The first sentence of a module's text, without its line breaks."""
    text = ast.get_docstring(ast.parse(module.read_text(encoding="utf-8"))) or ""
    return " ".join(text.split("\n\n")[0].split()).removesuffix(".") + "."


def module_map() -> str:
    """The map as Markdown: a heading a folder, a line a module."""
    lines: list[str] = []
    for source_root, package in ROOTS:
        base = TOP / source_root / package
        folders = [base / stage for stage in STAGES] if package == "stepring" else [base]
        for folder in folders:
            modules = sorted(path for path in folder.glob("*.py") if path.name != "__init__.py")
            if not modules:
                continue
            opening = folder / "__init__.py"
            lines += ["", f"**`{folder.relative_to(TOP)}/`** {first_sentence(opening)}", ""]
            lines += [f"- `{path.name}`: {first_sentence(path)}" for path in modules]
    return "\n".join(lines).strip()


def with_map(document: str) -> str:
    """The document with its map written anew."""
    before, _, rest = document.partition(BEGIN)
    _, _, after = rest.partition(END)
    return f"{before}{BEGIN}\n\n{module_map()}\n\n{END}{after}"


if __name__ == "__main__":
    DOCUMENT.write_text(with_map(DOCUMENT.read_text(encoding="utf-8")), encoding="utf-8")
