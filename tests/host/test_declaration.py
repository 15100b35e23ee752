"""The declaration and the filters say the same; this needs no host."""

import ast
from importlib import import_module
from xml.etree import ElementTree

import pytest

from fieldviz.host.declaration import ICONS, PLUGIN, XML, declaration

PROXIES = ElementTree.parse(XML).getroot().findall("ProxyGroup/SourceProxy")
FILTERS = [proxy for proxy in PROXIES if proxy.find("InputProperty") is not None]


def class_of(proxy):
    module, _, name = proxy.get("class").rpartition(".")
    return getattr(import_module(module), name)


def properties(proxy):
    """Declared properties that a setting stands behind, by name."""
    kinds = ("IntVectorProperty", "DoubleVectorProperty", "StringVectorProperty")
    found = [one for kind in kinds for one in proxy.findall(kind)]
    return {one.get("name"): one for one in found if one.get("command") == f"Set{one.get('name')}"}


@pytest.mark.parametrize("proxy", PROXIES, ids=lambda proxy: proxy.get("name"))
def test_every_setting_is_declared_with_its_default(proxy):
    kind, declared = class_of(proxy), properties(proxy)
    missing = set(kind.SETTINGS) - set(declared)
    if proxy.find("InputProperty[@name='Seeds']") is not None:
        # With seeds from outside there is nothing to say about placing them.
        assert missing == {
            "Seeding", "Count", "Radii", "SeedAngle", "Height", "Thickness",
        }  # fmt: skip
    else:
        assert not missing
    assert set(declared) <= set(kind.SETTINGS)
    algorithm = kind()
    for name, one in declared.items():
        setting = kind.SETTINGS[name]
        text = one.get("default_values")
        number = {"IntVectorProperty": int, "DoubleVectorProperty": float}.get(one.tag)
        values = [number(word) for word in text.split()] if number else [text]
        assert setting.turned(name, values) == setting.default, name
        assert len(values) == int(one.get("number_of_elements"))
        getattr(algorithm, one.get("command"))(*values)
        words = [word.get("value") for word in one.findall("StringListDomain/String")]
        assert tuple(words) == setting.choices


@pytest.mark.parametrize("proxy", PROXIES, ids=lambda proxy: proxy.get("name"))
def test_everything_has_help_and_scripts_use_the_same_names(proxy):
    assert proxy.findtext("Documentation").strip()
    for one in proxy:
        if one.tag.endswith("Property") and one.get("name") != "CellArraysInfo":
            assert (one.findtext("Documentation") or "").strip().endswith("."), one.get("name")
            label = one.get("label", one.get("name"))
            assert label.replace(" ", "") == one.get("name")
    assert "".join(proxy.get("label").replace("-", "").split()) == proxy.get("name").replace(
        "FieldLineSeeds", "FieldLineSeeds"
    )


@pytest.mark.parametrize("proxy", PROXIES, ids=lambda proxy: proxy.get("name"))
def test_ports_and_groups_fit(proxy):
    kind = class_of(proxy)
    ports = proxy.findall("OutputPort")
    assert len(ports) == (len(kind.OUTPUTS) if len(kind.OUTPUTS) > 1 else 0)
    inputs = proxy.findall("InputProperty")
    for one in inputs:
        types = tuple(t.get("value") for t in one.findall("DataTypeDomain/DataType"))
        assert types == kind.INPUTS[int(one.get("port_index"))]
    grouped = [p.get("name") for p in proxy.findall("PropertyGroup/Property")]
    assert len(set(grouped)) == len(grouped)
    assert set(grouped) <= {*properties(proxy), "CellArrays"}
    algorithm = kind()
    for one in (*proxy.findall("StringVectorProperty[@information_only]"),):
        assert hasattr(algorithm, one.get("command"))


def test_visibility_hints_name_what_there_is():
    for proxy in PROXIES:
        declared = properties(proxy)
        for hint in proxy.iter("PropertyWidgetDecorator"):
            if hint.get("property"):
                choices = class_of(proxy).SETTINGS[hint.get("property")].choices
                assert hint.get("property") in declared
                assert hint.get("value") in choices


def test_menu_toolbar_and_icons():
    root = ElementTree.fromstring(declaration())
    shown = [one.get("name") for one in root.findall("ParaViewFilters/Category/Proxy")]
    assert sorted(shown) == sorted(proxy.get("name") for proxy in FILTERS)
    icons = {
        one.get("icon") for one in root.iter() if one.get("icon") is not None
    }  # fmt: skip
    for icon in icons:
        assert "{" not in icon
        drawing = ElementTree.parse(icon).getroot()
        assert drawing.tag.endswith("svg")
        assert len(drawing)
    assert len(icons) == len(list(ICONS.glob("*.svg")))


def test_the_loadable_file_carries_the_declaration():
    """The host tries every file of that folder; the one in Python must be a plain class."""
    files = sorted(p.name for p in PLUGIN.iterdir() if p.name != "__pycache__")
    assert files == ["fieldviz_plugin.py", "fieldviz_plugin.xml"]
    source = PLUGIN / "fieldviz_plugin.py"
    space = {"__file__": str(source), "__name__": "fieldviz_plugin"}
    exec(compile(source.read_text(), str(source), "exec"), space)
    assert space["Declaration"]._pvsm_proxy_xml == declaration()
    imported = {
        node.module for node in ast.walk(ast.parse(source.read_text()))
        if isinstance(node, ast.ImportFrom)
    }  # fmt: skip
    assert not any("paraview" in name for name in imported)
