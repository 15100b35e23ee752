#!/usr/bin/env python3
"""Write the annotated tree in DEVELOPERS.md from the first line of every module.

Example: .venv/bin/python scripts/module_tree.py --write
"""

from __future__ import annotations

import argparse
import ast
from pathlib import Path

ROOT = Path(__file__).resolve().parent.parent
PAGE = ROOT / "DEVELOPERS.md"
BEGIN, END = "<!-- tree: written by scripts/module_tree.py -->\n", "<!-- end of tree -->\n"


def first_line(path: Path) -> str:
    docstring = ast.get_docstring(ast.parse(path.read_text(encoding="utf-8"))) or ""
    return docstring.splitlines()[0] if docstring else ""


def tree() -> str:
    package = ROOT / "fieldviz"
    lines = ["```"]
    for folder in sorted(p.parent for p in package.rglob("__init__.py")):
        depth = len(folder.relative_to(package).parts)
        name = "  " * depth + folder.name + "/"
        lines.append(f"{name:34s}{first_line(folder / '__init__.py')}")
        for path in sorted(folder.glob("*.py")):
            if path.name != "__init__.py":
                name = "  " * (depth + 1) + path.name
                lines.append(f"{name:34s}{first_line(path)}")
    return "\n".join([*lines, "```", ""])


def with_tree(text: str) -> str:
    before, rest = text.split(BEGIN)
    return before + BEGIN + tree() + END + rest.split(END)[1]


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--write", action="store_true", help="update DEVELOPERS.md")
    if parser.parse_args().write:
        PAGE.write_text(with_tree(PAGE.read_text(encoding="utf-8")), encoding="utf-8")
    else:
        print(tree())


if __name__ == "__main__":
    main()
