"""Shapes of the sample scene and where rays meet them; all lengths in metres, y up, the wall at z = 0."""

from __future__ import annotations

from typing import Any, Protocol

import attrs
import numpy as np
from numpy.typing import NDArray

Rays = NDArray[np.floating[Any]]
"""(n, 3) origins or directions."""
Line = NDArray[np.floating[Any]]

FAR = np.float32(1e9)
_NEAR = np.float32(1e-4)


def dot(first: Rays, second: Rays) -> Line:
    """Return the (n,) scalar products of (n, 3) vectors."""
    return np.asarray(np.einsum("ij,ij->i", first, second))


class Shape(Protocol):
    """Something a ray can meet."""

    def meet(self, origins: Rays, directions: Rays) -> Line:
        """Return (n,) distances along unit directions to the nearest meeting; `FAR` where there is none."""
        ...

    def normal(self, points: Rays, directions: Rays) -> Rays:
        """Return (n, 3) unit normals at points on the shape, turned against the rays."""
        ...


@attrs.frozen
class Plane:
    """A plane across `axis` at `place`."""

    axis: int
    place: float

    def meet(self, origins: Rays, directions: Rays) -> Line:
        """See `Shape`."""
        with np.errstate(divide="ignore", invalid="ignore"):
            t = (np.float32(self.place) - origins[:, self.axis]) / directions[:, self.axis]
        return np.where(t > _NEAR, t, FAR)

    def normal(self, points: Rays, directions: Rays) -> Rays:
        """See `Shape`."""
        normal = np.zeros_like(points)
        normal[:, self.axis] = -np.sign(directions[:, self.axis])
        return normal


@attrs.frozen
class Vessel:
    """A thin-walled ellipsoid standing on the bench, open above its rim; a jar if the rim is above its top.

    Attributes:
        x, z: where it stands.
        radius: of its widest circle.
        height: of its centre above the bench.
        rise: vertical half axis.
        rim: height above the bench where it ends.
    """

    x: float
    z: float
    radius: float
    height: float
    rise: float
    rim: float

    def meet(self, origins: Rays, directions: Rays) -> Line:
        """See `Shape`."""
        result = np.full(len(origins), FAR)
        near = np.flatnonzero(self._passes(origins, directions))
        if len(near):
            o, d = origins[near], directions[near]
            walls = np.minimum(self._wall(o, d, 1.0), self._wall(o, d, 0.94))
            result[near] = np.minimum(walls, self._rim(o, d))
        return result

    def _passes(self, origins: Rays, directions: Rays) -> NDArray[np.bool_]:
        """Return whether rays pass through the sphere around the vessel."""
        to = np.array([self.x, self.height, self.z], np.float32) - origins
        along = dot(to, directions)
        return np.asarray(dot(to, to) - along * along < np.float32(max(self.radius, self.rise) ** 2))

    def _wall(self, origins: Rays, directions: Rays, thickness: float) -> Line:
        scale = 1 / (np.array([self.radius, self.rise, self.radius], np.float32) * np.float32(thickness))
        o = (origins - np.array([self.x, self.height, self.z], np.float32)) * scale
        d = directions * scale
        a, b, c = dot(d, d), dot(o, d), dot(o, o) - 1
        root = np.sqrt(np.maximum(b * b - a * c, 0))
        best = np.full(len(origins), FAR)
        for sign in (1, -1):  # the near root last, so that it wins
            t = (-b + sign * root) / a
            y = origins[:, 1] + t * directions[:, 1]
            valid = (b * b > a * c) & (t > _NEAR) & (y < self.rim) & (y > 0)
            best = np.where(valid, t, best)
        return best

    def _rim(self, origins: Rays, directions: Rays) -> Line:
        up = (self.rim - self.height) / self.rise
        if abs(up) >= 1:
            return np.full(len(origins), FAR)
        outer = self.radius * np.sqrt(1 - up * up)
        with np.errstate(divide="ignore", invalid="ignore"):
            t = (np.float32(self.rim) - origins[:, 1]) / directions[:, 1]
        x, z = origins[:, 0] + t * directions[:, 0] - self.x, origins[:, 2] + t * directions[:, 2] - self.z
        r = x * x + z * z
        return np.where((t > _NEAR) & (r < outer**2) & (r > (outer * 0.93) ** 2), t, FAR)

    def normal(self, points: Rays, directions: Rays) -> Rays:
        """See `Shape`."""
        axes = np.array([self.radius, self.rise, self.radius], np.float32)
        normal = (points - np.array([self.x, self.height, self.z], np.float32)) / axes**2
        normal /= np.sqrt(dot(normal, normal))[:, None]
        on_rim = np.abs(points[:, 1] - self.rim) < 1e-3
        normal[on_rim] = np.array([0, 1, 0], np.float32)
        facing = np.sign(dot(normal, directions))[:, None]
        return np.where(facing > 0, -normal, normal)

    def shade_of(self, points: Rays, normals: Rays) -> Line:
        """Return how much of the hemisphere above (n, 3) points the vessel covers, as of a sphere (Quilez 2006)."""
        to = np.array([self.x, self.height, self.z], np.float32) - points
        distance = np.sqrt(dot(to, to))
        size = np.float32((self.radius + min(self.rise, self.rim)) / 2)
        facing = np.maximum(dot(normals, to) / np.maximum(distance, 1e-6), 0)
        return np.clip(facing * (size / np.maximum(distance, size)) ** 2, 0, 1)
