"""Lines as they come out of tracing: points, where they end and why, fields along them."""

from __future__ import annotations

from dataclasses import dataclass, field, replace

import numpy as np

from fieldviz.errors import MissingFieldError
from fieldviz.lines import reasons
from fieldviz.wedge.coordinates import points_to_cartesian
from fieldviz.wedge.snapshot import Snapshot
from fieldviz.wedge.typing import Array, IntArray

__all__ = ["Footpoints", "LineSet"]

_MIDPLANE = 0.5 * np.pi


@dataclass(frozen=True)
class Footpoints:
    """Both ends of every line; index 0 is the start of the stored line, 1 its end.

    Attributes
    ----------
    position : (n_lines, 2, 3) array
        r, theta, phi with phi brought into the wedge; NaN for a line without points.
    wraps : (n_lines, 2) int array
        How many periods of the wedge the end lies from the seed's wedge.
    """

    position: Array
    wraps: IntArray


@dataclass(frozen=True, eq=False)
class LineSet:
    """Lines of a vector field.

    Attributes
    ----------
    spherical : (n, 3) array
        r, theta and unwrapped phi of all points, line after line.
    offsets : (n_lines + 1,) int array
        Line k has the points offsets[k] to offsets[k + 1].
    seed_index : (n_lines,) int array
        Place of the seed among the line's points; -1 for a line without points.
    end_code : (n_lines, 2) int array
        Why the line ends at its start and at its end; words in `end_reason`.
    length : (n_lines,) array
        Arc length, code length.
    name : str
        What was traced, for example "magnetic".
    period : float
        Azimuth after which the wedge repeats.
    first_phi : float
        Azimuth at which the wedge begins.
    fields : dict of str to (n,) array
        Fields sampled along the lines.
    """

    spherical: Array
    offsets: IntArray
    seed_index: IntArray
    end_code: IntArray
    length: Array
    name: str
    period: float
    first_phi: float = 0.0
    fields: dict[str, Array] = field(default_factory=dict)

    def __len__(self) -> int:
        return len(self.offsets) - 1

    @property
    def points(self) -> Array:
        """Cartesian points, (n, 3)."""
        return points_to_cartesian(self.spherical)

    @property
    def end_reason(self) -> list[tuple[str, str]]:
        """Words for both ends of every line; "not traced" where only one way was wanted."""
        return [(reasons.WORDS[a], reasons.WORDS[b]) for a, b in self.end_code]

    def line(self, index: int) -> Array:
        """r, theta, phi of one line, (n_points, 3)."""
        return self.spherical[self.offsets[index] : self.offsets[index + 1]]

    @property
    def _filled(self) -> Array:
        return np.flatnonzero(np.diff(self.offsets) > 0)

    @property
    def footpoints(self) -> Footpoints:
        """Both ends of every line."""
        position = np.full((len(self), 2, 3), np.nan)
        wraps = np.zeros((len(self), 2), dtype=np.int64)
        filled = self._filled
        ends = np.stack([self.offsets[:-1][filled], self.offsets[1:][filled] - 1], axis=1)
        place = self.spherical[ends]
        turns = np.floor((place[..., 2] - self.first_phi) / self.period)
        place[..., 2] -= turns * self.period
        position[filled], wraps[filled] = place, turns.astype(np.int64)
        return Footpoints(position, wraps)

    @property
    def twist(self) -> Array:
        """Azimuth that each line turns from its start to its end, radians; NaN without points."""
        turn = np.full(len(self), np.nan)
        filled = self._filled
        phi = self.spherical[:, 2]
        turn[filled] = phi[self.offsets[1:][filled] - 1] - phi[self.offsets[:-1][filled]]
        return turn

    def midplane_crossings(self) -> tuple[IntArray, Array]:
        """Where lines cross the midplane.

        Returns
        -------
        (n_crossings,) int array
            Line of each crossing.
        (n_crossings, 2) array
            R and unwrapped phi, linear between neighbouring points.

        Notes
        -----
        A line that begins, ends or turns on the midplane counts there too; one that runs along it
        counts where it comes to it.
        """
        side = np.sign(_MIDPLANE - self.spherical[:, 1])
        line = np.repeat(np.arange(len(self)), np.diff(self.offsets))
        same = line[:-1] == line[1:]
        through = same & (side[:-1] * side[1:] < 0)
        on = side == 0
        on[1:] &= ~(same & (side[:-1] == 0))
        at = np.flatnonzero(on | np.append(through, False)[: len(on)])
        after = np.minimum(at + 1, len(line) - 1)
        height = _MIDPLANE - self.spherical[:, 1]
        with np.errstate(invalid="ignore"):
            share = np.where(on[at], 0.0, height[at] / (height[at] - height[after]))
        R = self.spherical[:, 0] * np.sin(self.spherical[:, 1])
        values = np.stack([R, self.spherical[:, 2]], axis=1)
        return line[at], values[at] + share[:, None] * (values[after] - values[at])

    def with_fields(self, snapshot: Snapshot, *names: str) -> LineSet:
        """The same lines with more fields of a snapshot sampled along them."""
        from fieldviz.wedge.sampling import sample

        values, _ = sample(snapshot, self.spherical, names)
        return replace(self, fields=self.fields | values)

    def value(self, name: str) -> Array:
        """A field along the lines, (n,).

        Raises
        ------
        MissingFieldError
            If it was not sampled.
        """
        if name not in self.fields:
            known = ", ".join(sorted(self.fields)) or "none"
            raise MissingFieldError(
                f"Cannot give '{name}' along the lines: expected a sampled field, got lines with "
                f"{known}; sample it with `with_fields`."
            )
        return self.fields[name]
