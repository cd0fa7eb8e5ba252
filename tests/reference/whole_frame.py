"""The whole frame as it would be written with OpenCV: find the parts, turn each to the taught pose, gauge it."""

import cv2
import numpy as np

SIZE = (1280, 1024)
SHAPE_SIDE = 193
ANGLES = [3.0, 41.0, 77.0, 118.0, 149.0, 186.0, 222.0, 260.0, 301.0, 338.0]
BITTEN, BURRED = 3, 6  # one part has a bite at its rim, one a burr; both of this radius
FLAW = 11.0


def inside(u, v):
    """A disc of 38 px with a bar on one side of its middle line: neither its own mirror image nor alike when turned."""
    return (np.hypot(u, v) < 38) | ((u > 0) & (u < 76) & (v > 3) & (v < 24))


def taught():
    """The shape about the middle of a square, 255 where it is covered."""
    v, u = np.mgrid[:SHAPE_SIDE, :SHAPE_SIDE] - SHAPE_SIDE // 2
    return inside(u, v).astype(np.uint8) * 255


def picture(seed=1):
    """Ten parts at ten angles on an uneven belt with grain."""
    width, height = SIZE
    random = np.random.default_rng(seed)
    y, x = np.mgrid[:height, :width].astype(np.float64)
    belt = 40 + 60 * np.exp(-((x - width / 2) ** 2 + (y - height / 2) ** 2) / (0.5 * width**2))
    for i, angle in enumerate(np.radians(ANGLES)):
        dx, dy = x - (i % 5 + 0.5) * width / 5 - 0.3 * i, y - (i // 5 + 0.5) * height / 2 + 0.2 * i
        u, v = np.cos(angle) * dx + np.sin(angle) * dy, np.cos(angle) * dy - np.sin(angle) * dx
        part, flaw = inside(u, v), np.hypot(u + 38, v) < FLAW
        part = part & ~flaw if i == BITTEN else part | flaw if i == BURRED else part
        belt[part] += 90
    return np.clip(belt + random.normal(0, 2, belt.shape), 0, 255).astype(np.uint8)


def upright(mask):
    """Centroid and angle of a mask by its moments: the principal axis, and which way along it by the third moment."""
    m = cv2.moments(mask, binaryImage=True)
    angle = 0.5 * np.arctan2(2 * m["mu11"], m["mu20"] - m["mu02"])
    c, s = np.cos(angle), np.sin(angle)
    skew = c**3 * m["mu30"] + 3 * c * c * s * m["mu21"] + 3 * c * s * s * m["mu12"] + s**3 * m["mu03"]
    return m["m10"] / m["m00"], m["m01"] / m["m00"], angle + (np.pi if skew < 0 else 0)


class OpenCvGauge:
    """What is known once the shape is taught: its pose and its two distance maps."""

    def __init__(self, shape):
        self.shape = shape
        self.pose = upright(shape)
        self.inside = cv2.distanceTransform(shape, cv2.DIST_L2, cv2.DIST_MASK_PRECISE)
        self.outside = cv2.distanceTransform(255 - shape, cv2.DIST_L2, cv2.DIST_MASK_PRECISE)

    def figures(self, crop):
        """Missing and excess in px of one part: warped to the taught pose, then looked up in both distance maps."""
        (x, y, angle), (tx, ty, taught_angle) = upright(crop), self.pose
        c, s = np.cos(taught_angle - angle), np.sin(taught_angle - angle)
        turn = np.array([[c, -s, tx - c * x + s * y], [s, c, ty - s * x - c * y]])
        part = cv2.warpAffine(crop, turn, self.shape.shape[::-1], flags=cv2.INTER_NEAREST)
        _, missing, _, _ = cv2.minMaxLoc(self.inside, mask=cv2.bitwise_and(self.shape, cv2.bitwise_not(part)))
        _, excess, _, _ = cv2.minMaxLoc(self.outside, mask=part)
        return missing, excess

    def parts(self, components):
        """Box, area and figures of every component of `connectedComponentsWithStats`."""
        count, labels, stats, _ = components
        found = []
        for label in range(1, count):
            left, top, width, height, area = stats[label]
            crop = cv2.compare(labels[top : top + height, left : left + width], label, cv2.CMP_EQ)
            found.append(((left, top, width, height), area, *self.figures(crop)))
        return found


def check_same(ours, theirs):
    """Both must have found the ten parts and gauged them alike: moments alone turn a flawed part by a degree or two."""
    assert len(ours) == len(theirs) == len(ANGLES), (len(ours), len(theirs))
    by_box = {tuple(part["box"]): part for part in ours}
    worst = 0.0
    for (left, top, width, height), area, missing, excess in theirs:
        part = by_box[top, left, top + height, left + width]
        assert part["area"] == area and part["fit"] > 0.9, part
        worst = max(worst, abs(part["missing"] - missing), abs(part["excess"] - excess))
    assert worst < 4, worst
    assert sorted(part["missing"] > 6 for part in ours)[-2:] == [False, True]
    assert sorted(part["excess"] > 6 for part in ours)[-2:] == [False, True]
    return worst
