"""The diagrams of a report: over time and radius for a series, against radius for a snapshot."""

from __future__ import annotations

from fieldviz.report.courses import course_diagrams
from fieldviz.report.material import Material
from fieldviz.report.paper import Diagram
from fieldviz.report.profiles import profile_diagrams

__all__ = ["Diagram", "report_diagrams"]


def report_diagrams(material: Material) -> tuple[tuple[Diagram, ...], tuple[Diagram, ...]]:
    """Diagrams of the whole series, and those of its last snapshot.

    Parameters
    ----------
    material : Material

    Returns
    -------
    tuple of Diagram, tuple of Diagram
        The first is empty for a single snapshot.
    """
    of_series = tuple(course_diagrams(material)) if material.is_series else ()
    return of_series, tuple(profile_diagrams(material.records[-1]))
