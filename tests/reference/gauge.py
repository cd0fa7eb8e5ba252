"""Shape and gauge against scipy and scikit-image, live.

Run from the project's folder: python tests/reference/gauge.py [ORACLE]
ORACLE is the built example `gauge_oracle`; without it, cargo builds and runs it.

Sources: scipy.ndimage.distance_transform_edt, binary_hit_or_miss, binary_erosion, binary_dilation, label;
scipy.spatial.distance.directed_hausdorff; scipy.spatial.ConvexHull; skimage.measure.regionprops; skimage.morphology.thin.
"""

import json
import subprocess
import sys

import numpy as np
from scipy import ndimage
from scipy.spatial import ConvexHull
from scipy.spatial.distance import directed_hausdorff, pdist
from skimage import draw, measure, morphology

EIGHT = np.ones((3, 3), bool)


class Oracle:
    def __init__(self, path):
        command = [path] if path else ["cargo", "run", "-q", "--release", "--example", "gauge_oracle"]
        self.process = subprocess.Popen(command, stdin=subprocess.PIPE, stdout=subprocess.PIPE, text=True)

    def ask(self, op, **question):
        self.process.stdin.write(json.dumps({"op": op, **question}) + "\n")
        self.process.stdin.flush()
        line = self.process.stdout.readline()
        assert line, f"the oracle went away at {op}"
        return json.loads(line)

    def close(self):
        self.process.stdin.close()
        assert self.process.wait() == 0


def text(mask):
    return "".join("1" if value else "0" for value in np.asarray(mask).ravel())


def random_mask(random, largest=60):
    """Noise, or noise made smooth so that there are large pieces."""
    shape = random.integers(1, largest, 2)
    noise = random.random(shape)
    if random.random() < 0.6:
        noise = ndimage.gaussian_filter(noise, random.uniform(0.7, 4.0))
    return noise > np.quantile(noise, random.uniform(0.05, 0.95))


def drawn_shape(random, side=120):
    """A star, a polygon or a ring with a tab, drawn by scikit-image."""
    mask = np.zeros((side, side), bool)
    middle = side / 2 + random.uniform(-3, 3, 2)
    radius, turn = random.uniform(0.28, 0.38) * side, random.uniform(0, 2 * np.pi)
    kind = random.integers(3)
    corners = 10 if kind == 0 else random.integers(3, 9)
    angles = turn + np.arange(corners) * 2 * np.pi / corners
    radii = np.where(np.arange(corners) % 2, 0.5, 1.0) * radius if kind == 0 else np.full(corners, radius)
    if kind == 2:
        mask[draw.disk(middle, radius, shape=mask.shape)] = True
        along, across = np.array([np.cos(turn), np.sin(turn)]), np.array([-np.sin(turn), np.cos(turn)])
        tab = [middle + radius * (u * along + v * across) for u, v in [(0.9, 0.1), (1.2, 0.1), (1.2, 0.4), (0.8, 0.4)]]
        mask[draw.polygon(*np.transpose(tab), shape=mask.shape)] = True
        mask[draw.disk(middle, 0.5 * radius, shape=mask.shape)] = False
    else:
        points = middle + radii[:, None] * np.stack([np.cos(angles), np.sin(angles)], 1)
        mask[draw.polygon(*points.T, shape=mask.shape)] = True
    return mask


def edge_point(random, mask):
    edge = np.argwhere(mask & ~ndimage.binary_erosion(mask, EIGHT))
    return edge[random.integers(len(edge))]


def flawed(random, t, bites, burrs):
    a = t.copy()
    for _ in range(bites):
        a[draw.disk(edge_point(random, t), random.uniform(1.5, 14), shape=a.shape)] = False
    for _ in range(burrs):
        a[draw.disk(edge_point(random, t), random.uniform(1.5, 12), shape=a.shape)] = True
    return a


def check_distances(oracle, random):
    """Squared distances are whole numbers, so they must be equal to the bit."""
    count = 0
    for _ in range(150):
        mask = random_mask(random)
        ours = oracle.ask("distances", width=mask.shape[1], mask=text(mask))
        padded = ndimage.distance_transform_edt(np.pad(mask, 1))[1:-1, 1:-1]
        assert np.array_equal(np.array(ours["to_background"]).reshape(mask.shape), np.rint(padded**2))
        if mask.any():
            there = ndimage.distance_transform_edt(~mask)
            assert np.array_equal(np.array(ours["to_foreground"]).reshape(mask.shape), np.rint(there**2))
        count += mask.size
    print(f"distance transform: {count} squared distances equal to scipy's")


def check_hit_or_miss(oracle, random):
    """At a = b = 0 and whole shifts the gauge is the hit-or-miss transform.

    The hit element is T, the miss element its ring: the pixels around it. A region that contains T and leaves the ring
    free is T itself, so the transform marks exactly the places at which some region has both figures 0.
    """
    places = hits = 0
    for _ in range(12):
        t = np.pad(morphology.remove_small_objects(random_mask(random, 9), max_size=4, connectivity=2), 1)
        labels, count = ndimage.label(t, EIGHT)
        if count == 0:
            continue
        t = labels == 1
        ring = ndimage.binary_dilation(t, EIGHT) & ~t
        picture = np.zeros((40, 44), bool)
        for _ in range(7):
            y, x = (random.integers(0, picture.shape[i] - t.shape[i]) for i in (0, 1))
            part = t.copy()
            if random.random() < 0.3:
                y0, x0 = np.argwhere(t)[random.integers(t.sum())]
                part[y0, x0] = False
            picture[y : y + t.shape[0], x : x + t.shape[1]] |= part
        origin = [-(size // 2) for size in t.shape]
        theirs = ndimage.binary_hit_or_miss(picture, t, ring, origin1=origin, origin2=origin)
        rows, columns = (picture.shape[i] - t.shape[i] + 1 for i in (0, 1))
        theirs = theirs[:rows, :columns]
        ours = np.zeros((rows, columns), bool)
        regions, count = ndimage.label(picture, EIGHT)
        for region in range(1, count + 1):
            figures = oracle.ask(
                "shifts", width=picture.shape[1], a=text(regions == region), t_width=t.shape[1], t=text(t)
            )
            ours |= (np.array(figures).reshape(rows, columns, 2) == 0).all(axis=2)
        assert np.array_equal(ours, theirs)
        places, hits = places + ours.size, hits + int(ours.sum())
    assert hits > 10, hits
    print(f"hit-or-miss: {places} places, {hits} hits, equal to scipy's")


def figures(t, a):
    """Both figures and the two distance pictures, by scipy alone."""
    inside = ndimage.distance_transform_edt(np.pad(t, 1))[1:-1, 1:-1]
    outside = ndimage.distance_transform_edt(~t)
    return inside, outside, inside[t & ~a].max(initial=0.0), outside[a & ~t].max(initial=0.0)


def check_band(oracle, random):
    """Both figures, and that they are the smallest band that hit-or-miss with distances passes."""
    count = 0
    for _ in range(200):
        t = drawn_shape(random)
        a = flawed(random, t, random.integers(3), random.integers(3))
        ours = oracle.ask("gauge", width=t.shape[1], t=text(t), a=text(a))
        inside, outside, missing, excess = figures(t, a)
        assert abs(ours["missing"]["px"] - missing) < 1e-9 and abs(ours["excess"]["px"] - excess) < 1e-9
        for name, distances, where in [("missing", inside, t & ~a), ("excess", outside, a & ~t)]:
            at = ours[name]["at"]
            assert (at is None) == (not where.any())
            if at is not None:
                assert where[at[1], at[0]] and abs(distances[at[1], at[0]] - ours[name]["px"]) < 1e-9
        for near_a in (missing - 1e-6, missing + 1e-6):
            for near_b in (excess - 1e-6, excess + 1e-6):
                # At a = b = 0 the elements are T and everything else; below 0 nothing passes.
                hit, miss = (inside > near_a) & t, (outside > near_b) & ~t
                passes = a[hit].all() and not a[miss].any()
                band = (missing == 0 or near_a >= missing) and (excess == 0 or near_b >= excess)
                assert passes == band
        count += 1
    print(f"band: {count} drawn parts with bites and burrs, both figures equal to scipy's")


def check_hausdorff(oracle, random):
    """Where the figures are directed Hausdorff distances between two boundaries.

    Let the inner boundary of a set be its pixels with a neighbour (of eight) outside, the outer one the pixels outside
    with a neighbour inside.

    excess is the distance from A's inner to T's inner boundary if A holds all of T, and the pixel of A that is farthest
    from T lies on A's boundary: so it does unless A fills a bay of T beyond the bay's middle line.
    missing is the distance from A's outer to T's outer boundary if T holds all of A, and the deepest pixel of T without A
    lies next to A: so it does unless the bite reaches beyond T's middle line.
    With both a bite and a burr, a boundary point in the bite would count for the other figure; that is the difference
    between the two figures and one Hausdorff distance.
    """
    compared = {"missing": 0, "excess": 0}
    for _ in range(300):
        t = drawn_shape(random)
        bite = random.random() < 0.5
        a = flawed(random, t, int(bite), int(not bite))
        inside, outside, missing, excess = figures(t, a)
        ours = oracle.ask("gauge", width=t.shape[1], t=text(t), a=text(a))
        if bite:
            outer_a = ndimage.binary_dilation(a, EIGHT) & ~a
            outer_t = ndimage.binary_dilation(t, EIGHT) & ~t
            coincide = inside[outer_a & t].max(initial=0.0) == missing
            pair, name = (outer_a, outer_t), "missing"
        else:
            inner_a = a & ~ndimage.binary_erosion(a, EIGHT)
            inner_t = t & ~ndimage.binary_erosion(t, EIGHT)
            coincide = outside[inner_a].max(initial=0.0) == excess
            pair, name = (inner_a, inner_t), "excess"
        distance = directed_hausdorff(np.argwhere(pair[0]), np.argwhere(pair[1]))[0]
        if coincide:
            assert abs(distance - ours[name]["px"]) < 1e-9, (name, distance, ours)
            compared[name] += 1
        else:
            assert distance <= ours[name]["px"] + 1e-9
    assert min(compared.values()) > 80, compared
    print(f"Hausdorff: equal to scipy's where they must coincide: {compared}")


def middles(mask):
    """The middles of the sides of all pixels."""
    pixels = np.argwhere(mask).astype(float)
    return np.concatenate([pixels + side for side in [(0.5, 0), (-0.5, 0), (0, 0.5), (0, -0.5)]])


def feret(mask):
    hull = ConvexHull(middles(mask))
    corners = hull.points[hull.vertices]
    widths = [np.ptp(corners @ equation[:2]) for equation in hull.equations]
    return pdist(corners).max(), min(widths)


def check_measures(oracle, random):
    farthest_off = 0.0
    for i in range(150):
        mask = drawn_shape(random) if i % 2 else np.pad(random_mask(random), 1)
        mask = flawed(random, mask, 2, 2) if i % 2 else mask
        labels, count = ndimage.label(mask, EIGHT)
        if count == 0:
            continue
        mask = labels == 1 + np.argmax(ndimage.sum_labels(mask, labels, range(1, count + 1)))
        ours = oracle.ask("measures", width=mask.shape[1], mask=text(mask), branch_above_px=5.0)
        length, width = feret(mask)
        assert ours["area_px"] == mask.sum()
        assert abs(ours["length_px"] - length) < 1e-9 and abs(ours["width_px"] - width) < 1e-9
        assert ours["boundary_px"] == (mask & ~ndimage.binary_erosion(mask, EIGHT)).sum()
        props = measure.regionprops(mask.astype(int))[0]
        # One region: its holes are what its Euler number lacks to 1.
        assert ours["holes"] == 1 - props.euler_number
        # scikit-image measures the hull after drawing it in pixels again, so it may be longer by a corner of a pixel.
        off = props.feret_diameter_max - ours["length_px"]
        assert -1e-9 <= off < 1.0, off
        farthest_off = max(farthest_off, off)
    print(f"measures: equal to scipy's and scikit-image's (its longest extent is up to {farthest_off:.2f} px more)")


def check_skeleton(oracle, random):
    for i in range(120):
        mask = drawn_shape(random, 80) if i % 2 else random_mask(random)
        ours = oracle.ask("thin", width=mask.shape[1], mask=text(mask))
        assert ours == text(morphology.thin(mask)), i
    print("skeleton: 120 pictures equal to skimage.morphology.thin")


def main():
    oracle = Oracle(sys.argv[1] if len(sys.argv) > 1 else None)
    checks = [check_distances, check_hit_or_miss, check_band, check_hausdorff, check_measures, check_skeleton]
    for seed, check in enumerate(checks):
        check(oracle, np.random.default_rng(seed))
    oracle.close()


if __name__ == "__main__":
    main()
