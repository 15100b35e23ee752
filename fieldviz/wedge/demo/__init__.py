"""The Saltmarsh disc: an invented magnetised disc with flux sheets and a wind of chosen parity.

It is kinematic: continuity and div B = 0 hold exactly, momentum and energy balance do not. What
it is for is comparison: mass loss, flux, sheet radii and footpoints are known in closed form.
"""

from __future__ import annotations

from fieldviz.wedge.demo.build import demo_disc
from fieldviz.wedge.demo.disc import WINDS, SaltmarshDisc

__all__ = ["WINDS", "SaltmarshDisc", "demo_disc"]
