"""Run inside the host by `fieldviz host check`: read a snapshot, run every filter, say what came.

Arguments: the declaration and a snapshot. Prints one line of JSON for each step. What is declared
is taken from the declaration, so a filter that is added there is tried here.
"""

from __future__ import annotations

import json
import sys
import time
from pathlib import Path
from typing import Any
from xml.etree import ElementTree

MARK = "fieldviz tried: "


def declared(xml: Path, group: str) -> list[tuple[str, list[str]]]:
    """Python names of a group's proxies, and the names of their inputs."""
    found = []
    for proxy in ElementTree.parse(xml).getroot().findall(f"ProxyGroup[@name='{group}']/*"):
        label = "".join(c for c in proxy.get("label", "") if c.isalnum())
        found.append((label, [one.get("name", "") for one in proxy.findall("InputProperty")]))
    return found


def tell(step: str, began: float, proxy: Any, error: str = "") -> None:
    """Say what a step gave."""
    cells = rows = 0
    if not error:
        proxy.UpdatePropertyInformation()
        error = str(proxy.LastError)
        for port in range(proxy.SMProxy.GetNumberOfOutputPorts()):
            information = proxy.GetDataInformation(port)
            cells += information.GetNumberOfCells()
            rows += information.GetNumberOfRows()
        if not error and not cells + rows:
            error = "no output"
    said = {"step": step, "error": error, "cells": cells, "rows": rows,
            "seconds": time.monotonic() - began}  # fmt: skip
    print(MARK + json.dumps(said), flush=True)


def main(xml: str, snapshot: str) -> None:
    """Load the plugin, read, and run every filter with its defaults."""
    from paraview import simple  # type: ignore[import-not-found]

    simple.LoadPlugin(xml, ns=vars(simple))
    ((reader_name, _),) = declared(Path(xml), "sources")
    began = time.monotonic()
    reader = getattr(simple, reader_name)(FileNames=[snapshot])
    reader.UpdatePipeline()
    tell(reader_name, began, reader)
    seeds = None
    for name, inputs in declared(Path(xml), "filters"):
        began = time.monotonic()
        proxy = None
        try:
            sources = {"Input": reader} | ({"Seeds": seeds} if "Seeds" in inputs else {})
            proxy = getattr(simple, name)(**sources)
            proxy.UpdatePipeline()
            seeds = seeds or proxy
            tell(name, began, proxy)
        except Exception as error:  # noqa: BLE001 - the next filter is to be tried all the same
            tell(name, began, proxy, f"{type(error).__name__}: {error}")


if __name__ == "__main__":
    main(*sys.argv[1:3])
