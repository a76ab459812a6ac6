"""Measures overhang, support and walls of a finished set again, with numpy and manifold3d only.

usage: python check_measures.py DIR

DIR holds set.json and the STL files it names. Compared with the findings of each stage:
- overhang-area (outer surface and chambers together): from the facets, to 1e-3;
- support-volume: mean length of 4000 vertical rays times the shadow of the overhang, to 5 %;
- wall-ray: a ray at the place of the finding, to 5 %; and of 4000 rays elsewhere none is more than 5 % shorter,
  but for edges: places beside which a ball as thick as the wall should be fits into the material.
The angle limit is that of the profile in profiles/. Rays are cast by manifold3d.

Prints one line a stage, then `N passed, N failed`; the exit status is 1 when anything failed.
"""

import json
import pathlib
import sys
import tomllib

import manifold3d
import numpy as np
import scipy.spatial

from check_set import Faults, arrays

RAYS = 4000
REACH_MM = 1e4
OFF_MM = 1e-5  # rays start this far from the surface
TIE_DEG = 0.01  # facets at the limit to this angle need no support
RESTING_MM = 1e-3
WEDGE_MM = 0.01  # thinner: the edge of a sharp wedge, where thickness goes to nothing and no ray repeats it
FACING = -0.5  # cosine between normals of two sides of a wall
HOLDS = 0.9  # share of its radius that such a ball must have free
PROFILES = pathlib.Path(__file__).parents[2] / "profiles"


class Solid:
    """A closed mesh with its facets and rays."""

    def __init__(self, path):
        vertices, faces = arrays(path, "stl")
        self.body = manifold3d.Manifold(manifold3d.Mesh(vertices.astype(np.float32), faces.astype(np.uint32)))
        corners = vertices[faces]
        cross = np.cross(corners[:, 1] - corners[:, 0], corners[:, 2] - corners[:, 0])
        doubled = np.linalg.norm(cross, axis=1)
        self.areas = doubled / 2.0
        self.normals = cross / np.maximum(doubled, 1e-300)[:, None]
        self.corners = corners
        self.plate = vertices[:, 2].min()
        sides = np.linalg.norm(corners - np.roll(corners, 1, axis=1), axis=2).max(axis=1)
        self.thin = doubled < 0.05 * sides**2  # least altitude below a twentieth of the longest side
        self.dice = np.random.default_rng(1)

    def first(self, start, way, fits):
        """Distance from `start` to the first hit along the unit vector `way` whose normal `fits`; else None."""
        for hit in self.body.ray_cast(tuple(start), tuple(start + REACH_MM * way)):
            if fits(np.asarray(hit.normal)):
                return hit.distance * REACH_MM
        return None

    def points(self, weights):
        """RAYS random points of the surface, facets taken in proportion to `weights`."""
        chosen = self.dice.choice(len(weights), RAYS, p=weights / weights.sum())
        u, v = np.sort(self.dice.random((2, RAYS)), axis=0)
        c = self.corners[chosen]
        return chosen, c[:, 0] * u[:, None] + c[:, 1] * (v - u)[:, None] + c[:, 2] * (1.0 - v)[:, None]


def values(stage, *checks):
    """The sum of the findings of these names; None when there is none."""
    found = [f["value"] for f in stage["findings"] if f["check"] in checks]
    return sum(found) if found else None


def check_overhang(solid, stage, limit_deg, faults):
    down = solid.normals[:, 2] < 0.0
    angle = np.degrees(np.arctan2(np.linalg.norm(solid.normals[:, :2], axis=1), -solid.normals[:, 2]))
    rests = (solid.corners[:, :, 2] <= solid.plate + RESTING_MM).all(axis=1)
    over = down & (angle < limit_deg - TIE_DEG) & ~rests
    area = solid.areas[over].sum()
    given = values(stage, "overhang-area", "overhang-area-inside")
    faults.need(given is not None, "no finding overhang-area")
    faults.near(area, given or 0.0, 1e-3 * area + 1e-6, "overhang area in mm2")
    given = values(stage, "support-volume", "support-volume-inside")
    faults.need(given is not None, "no finding support-volume")
    if not over.any():
        return area, 0.0
    shadow = np.where(over, -solid.normals[:, 2] * solid.areas, 0.0)
    straight_down = np.array([0.0, 0.0, -1.0])
    lengths = []
    for point in solid.points(shadow)[1]:
        below = solid.first(point + OFF_MM * straight_down, straight_down, lambda n: n[2] > 0.0)
        lengths.append(point[2] - solid.plate if below is None else below)
    volume = float(np.mean(lengths)) * shadow.sum()
    faults.near(volume, given or 0.0, 0.05 * volume, "support volume in mm3")
    return area, volume


class Edges:
    """Tells teeth and knife edges from walls by the balls that fit beside them."""

    def __init__(self, solid, limit_mm):
        self.middles = solid.corners.mean(axis=1)
        self.balls = self.middles - solid.normals * (limit_mm / 2.0)
        self.near_ball = scipy.spatial.cKDTree(self.balls)
        self.near_surface = scipy.spatial.cKDTree(np.concatenate([self.middles, solid.corners.reshape(-1, 3)]))
        self.free = HOLDS * limit_mm / 2.0
        spacing = np.sqrt(solid.areas.sum() / np.clip(len(solid.areas), 20_000, 200_000))
        self.reach = 1.5 * limit_mm + 0.7 * spacing

    def has(self, middle):
        """Whether a thin place with this middle stands on thicker material."""
        for t in self.near_ball.query_ball_point(middle, 1.1 * self.reach):
            if self.near_surface.query(self.balls[t])[0] >= self.free:
                return True
        return False


def full_wall(stage, profile):
    """The thickness walls should have: the profile's, or what was asked for if that is more."""
    asked = [f["limit"] for f in stage["findings"] if f["check"] == "wall-asked"]
    return max([profile["wall_unsupported_mm"]["value"], *asked])


def check_wall(solid, stage, profile, faults):
    finding = next((f for f in stage["findings"] if f["check"] == "wall-ray" and f["place_mm"]), None)
    if finding is None:
        return None
    thickness, place = finding["value"], np.array(finding["place_mm"])

    near = scipy.spatial.cKDTree(solid.corners.mean(axis=1)).query(place, k=min(12, len(solid.areas)))[1]
    lengths = [
        solid.first(place - OFF_MM * solid.normals[t], -solid.normals[t], lambda _: True)
        for t in np.atleast_1d(near)
    ]
    lengths = [length for length in lengths if length is not None]
    faults.need(bool(lengths), "no ray meets the other side at the place of the thinnest wall")
    if lengths and thickness > WEDGE_MM:
        best = min(lengths, key=lambda length: abs(length - thickness))
        faults.near(best, thickness, 0.05 * thickness, "wall by a ray at its place in mm")
    edges = Edges(solid, full_wall(stage, profile))
    shortest = np.inf
    chosen, points = solid.points(np.where(solid.thin, 0.0, solid.areas))
    for t, point in zip(chosen, points):
        n = solid.normals[t]
        hits = solid.body.ray_cast(tuple(point - OFF_MM * n), tuple(point - REACH_MM * n))
        if hits and np.dot(hits[0].normal, n) <= FACING:
            length = hits[0].distance * (REACH_MM - OFF_MM)
            if length >= 0.95 * thickness or not edges.has(point - n * (length / 2.0)):
                shortest = min(shortest, length)
    found = shortest >= 0.95 * thickness or thickness <= WEDGE_MM
    faults.need(found, f"a wall of {shortest:.4f} mm was found, set.json says {thickness:.4f}")
    return shortest


def main():
    if len(sys.argv) != 2:
        sys.exit(__doc__)
    folder = pathlib.Path(sys.argv[1])
    record = json.loads((folder / "set.json").read_text(encoding="utf-8"))
    profile = tomllib.loads((PROFILES / f"{record['profile']['name']}.toml").read_text(encoding="utf-8"))
    limit = profile.get("overhang_deg")
    passed = failed = 0
    for stage in record["stages"]:
        name = stage["files"].get("stl")
        if name is None:
            continue
        faults, said = Faults(), []
        solid = Solid(folder / name)
        if limit:
            area, volume = check_overhang(solid, stage, limit["value"], faults)
            said.append(f"overhang {area:.1f} mm2, support {volume:.0f} mm3")
        shortest = check_wall(solid, stage, profile, faults)
        if shortest is not None:
            said.append(f"shortest of {RAYS} wall rays {shortest:.3f} mm")
        if faults.found:
            failed += 1
            print(f"FAILED {name}: " + "; ".join(faults.found))
        else:
            passed += 1
            print(f"ok     {name}: " + ", ".join(said))
    print(f"{passed} passed, {failed} failed")
    sys.exit(1 if failed or not passed else 0)


if __name__ == "__main__":
    main()
