"""The developers' page keeps up with the tree."""

import importlib.util
from pathlib import Path

ROOT = Path(__file__).resolve().parent.parent


def test_the_tree_is_up_to_date_and_every_module_says_what_it_holds():
    spec = importlib.util.spec_from_file_location("module_tree", ROOT / "scripts/module_tree.py")
    module_tree = importlib.util.module_from_spec(spec)
    spec.loader.exec_module(module_tree)
    page = (ROOT / "DEVELOPERS.md").read_text(encoding="utf-8")
    assert module_tree.with_tree(page) == page, "run scripts/module_tree.py --write"
    silent = [p for p in (ROOT / "fieldviz").rglob("*.py") if not module_tree.first_line(p)]
    assert silent == []
