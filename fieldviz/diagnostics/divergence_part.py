"""The divergence of the field as a part: absent without a field, never an empty result."""

from __future__ import annotations

from fieldviz.derived.divergence import DivergenceError, divergence_error
from fieldviz.wedge.fields import MAGNETIC
from fieldviz.wedge.snapshot import Snapshot

__all__ = ["divergence_of_the_field"]


def divergence_of_the_field(snapshot: Snapshot) -> DivergenceError:
    """`divergence_error` of a snapshot that has the three components.

    Raises
    ------
    MissingFieldError
    """
    snapshot.require("measure the divergence of the field", *MAGNETIC)
    return divergence_error(snapshot)
