"""Holds the gray stage against scipy, scikit-image and OpenCV, live.

    cargo build --release --example oracle
    python tests/reference/stage.py target/release/examples/oracle

Pictures: `coins.png` of scikit-image and seeded random ones. Everything is done at every kernel level of this machine.
Integers must be equal, real numbers equal to 1e-9.
"""

import sys

import cv2
import numpy as np
import skimage
from scipy import ndimage
from skimage import data, filters, measure, morphology

from oracle import Oracle

EIGHT = np.ones((3, 3), bool)
FOUR = ndimage.generate_binary_structure(2, 1)
SIZES = [1, 2, 3, 4, 7, 8, 15, 16, 31, 50, 51, 64, 65, 100, 101, 200, 201]

# White top-hat with a square of 51 px, Otsu, fill, 8-connected regions of at least 500 px on coins.png: found with scipy
# 1.17 and with OpenCV 5.0, which agree.
COIN_AREAS = [893, 895, 1077, 1099, 1102, 1115, 1165, 1190, 1223, 1305, 1422, 1457, 1483, 1546, 1562, 1598, 1751, 1770,
              1907, 1976, 2319, 2366, 2589, 3115]


class Checks:
    """Counts what was compared and says what differs."""

    def __init__(self):
        self.passed = 0
        self.failed = []

    def same(self, ours, theirs, what):
        ours, theirs = np.asarray(ours), np.asarray(theirs)
        if ours.shape == theirs.shape and (ours == theirs).all():
            self.passed += 1
        else:
            self.failed.append(what)
            where = np.argwhere(ours != theirs)[:3].tolist() if ours.shape == theirs.shape else (ours.shape, theirs.shape)
            print(f"DIFFERS: {what}: {where}")

    def close(self, ours, theirs, what):
        if np.allclose(ours, theirs, rtol=1e-9, atol=1e-9):
            self.passed += 1
        else:
            self.failed.append(what)
            print(f"DIFFERS: {what}: {ours} {theirs}")


def pictures():
    """Name and picture. Random ones are noise, smooth, and of few values; two are smaller than most elements."""
    random = np.random.default_rng(20261201)
    yield "coins", data.coins()
    for width, height in [(97, 61), (64, 64), (33, 130), (7, 5), (1, 40), (40, 1)]:
        noise = random.integers(0, 256, (height, width), dtype=np.uint8)
        yield f"noise {width}x{height}", noise
        yield f"smooth {width}x{height}", cv2.GaussianBlur(noise, (0, 0), 2)
    yield "few values 80x50", random.integers(0, 3, (50, 80), dtype=np.uint8) * 100


def elements():
    for size in SIZES:
        yield size, size
    yield from [(1, 9), (9, 1), (6, 1), (1, 6), (5, 12), (12, 5), (201, 2), (2, 201)]


def check_morphology(oracle, checks, level, name, picture):
    stored = oracle.store(picture)
    for width, height in elements():
        size = (height, width)
        what = f"{name}, {width}x{height}, {level}"
        ask = lambda op, **more: oracle.ask(op, level=level, element=[width, height], **stored, **more)
        shaped = lambda answer: answer["pixels"].reshape(picture.shape)
        eroded, dilated = shaped(ask("erosion")), shaped(ask("dilation"))
        bright, dark = shaped(ask("top_hat")), shaped(ask("top_hat", dark=True))
        checks.same(eroded, ndimage.grey_erosion(picture, size), f"erosion: scipy: {what}")
        checks.same(dilated, ndimage.grey_dilation(picture, size), f"dilation: scipy: {what}")
        checks.same(picture - bright, ndimage.grey_opening(picture, size), f"opening: scipy: {what}")
        checks.same(picture + dark, ndimage.grey_closing(picture, size), f"closing: scipy: {what}")
        checks.same(bright, ndimage.white_tophat(picture, size), f"white top-hat: scipy: {what}")
        checks.same(dark, ndimage.black_tophat(picture, size), f"black top-hat: scipy: {what}")
        check_against_opencv(checks, what, picture, (width, height), eroded, dilated, bright, dark)
        if max(width, height) < 16:
            check_against_scikit_image(checks, what, picture, (width, height), bright, dark)


def check_against_opencv(checks, what, picture, size, eroded, dilated, bright, dark):
    """OpenCV uses the same anchor for both passes of an opening. With an even size that is no opening: it is not below the
    picture everywhere and not idempotent. So only its single passes are held against ours there, with the anchor given."""
    width, height = size
    kernel = np.ones((height, width), np.uint8)
    mirrored = (width - 1 - width // 2, height - 1 - height // 2)
    checks.same(eroded, cv2.erode(picture, kernel), f"erosion: OpenCV: {what}")
    checks.same(dilated, cv2.dilate(picture, kernel, anchor=mirrored), f"dilation: OpenCV: {what}")
    if width % 2 and height % 2:
        checks.same(bright, cv2.morphologyEx(picture, cv2.MORPH_TOPHAT, kernel), f"top-hat: OpenCV: {what}")
        checks.same(dark, cv2.morphologyEx(picture, cv2.MORPH_BLACKHAT, kernel), f"black-hat: OpenCV: {what}")


def check_against_scikit_image(checks, what, picture, size, bright, dark):
    """For an even size scikit-image's white top-hat reaches the other way (it shows at the border only): turned by half a
    turn, the picture gives ours."""
    element = np.ones(size[::-1], bool)
    turned = morphology.white_tophat(picture[::-1, ::-1], element)[::-1, ::-1]
    checks.same(bright, turned, f"white top-hat: scikit-image: {what}")
    checks.same(dark, morphology.black_tophat(picture, element), f"black top-hat: scikit-image: {what}")


def octagon(diameter):
    """The set that the documentation states: |x| <= r, |y| <= r, |x| + |y| <= r + h."""
    r = (diameter - 1) // 2
    g = min(int(np.floor(r * (1 - 1 / np.sqrt(2)) + 0.5)), max(r - 1, 0) // 2)
    h = r - 2 * g
    y, x = np.mgrid[-r:r + 1, -r:r + 1]
    return np.abs(x) + np.abs(y) <= r + h


def check_octagons(oracle, checks, level, name, picture):
    """The footprint of scipy's functions and OpenCV's kernel may be any set; the octagon is given to them as one."""
    stored = oracle.store(picture)
    for diameter in [1, 3, 5, 7, 9, 15, 21, 41]:
        what = f"{name}, octagon {diameter}, {level}"
        footprint = octagon(diameter)
        kernel = footprint.astype(np.uint8)
        bright = oracle.ask("top_hat", level=level, element=[diameter], **stored)["pixels"].reshape(picture.shape)
        dark = oracle.ask("top_hat", level=level, element=[diameter], dark=True, **stored)["pixels"].reshape(picture.shape)
        checks.same(bright, cv2.morphologyEx(picture, cv2.MORPH_TOPHAT, kernel), f"top-hat: OpenCV: {what}")
        checks.same(dark, cv2.morphologyEx(picture, cv2.MORPH_BLACKHAT, kernel), f"black-hat: OpenCV: {what}")
        if picture.size < 20_000 and min(picture.shape) >= diameter:
            checks.same(bright, ndimage.white_tophat(picture, footprint=footprint), f"top-hat: scipy: {what}")


def whole(picture):
    """An element so large that the opening is the picture's least value everywhere: with a black pixel in the picture the
    top-hat is the picture itself, and the steps after it can be checked on any picture."""
    return [2 * picture.shape[1] + 1, 2 * picture.shape[0] + 1]


def with_black(picture):
    picture = picture.copy()
    picture[0, 0] = 0
    return picture


def check_otsu(oracle, checks, level, name, picture):
    hat = ndimage.white_tophat(picture, (15, 15))
    plain = oracle.ask("stage", level=level, element=[15, 15], threshold=["otsu", 0], **oracle.store(picture))
    checks.same(plain["top_hat"].reshape(hat.shape), hat, f"top-hat before Otsu: scipy: {name}, {level}")
    checks.same(plain["level"], filters.threshold_otsu(hat), f"Otsu: scikit-image: {name}, {level}")
    checks.same(plain["level"], cv2.threshold(hat, 0, 255, cv2.THRESH_OTSU)[0], f"Otsu: OpenCV: {name}, {level}")
    checks.same(plain["binary"].reshape(hat.shape) > 0, hat > filters.threshold_otsu(hat), f"binary: {name}, {level}")
    floored = oracle.ask("stage", level=level, element=[15, 15], threshold=["otsu", 99], **oracle.store(picture))
    checks.same(floored["level"], max(99, plain["level"]), f"Otsu with a floor: {name}, {level}")


def check_hysteresis(oracle, checks, level, name, picture):
    """scikit-image's own function joins over edges only; its reconstruction by dilation takes the neighbourhood as an
    argument and gives the same thing over edges and corners."""
    picture = with_black(picture)
    stored = oracle.store(picture)
    for low, high in [(80, 140), (30, 200), (128, 128), (0, 254)]:
        what = f"hysteresis {low} {high}: {name}, {level}"
        answer = oracle.ask("stage", level=level, element=whole(picture), threshold=["hysteresis", low, high], **stored)
        ours = answer["binary"].reshape(picture.shape) > 0
        seed, mask = (picture > high).astype(np.uint8), (picture > low).astype(np.uint8)
        theirs = morphology.reconstruction(seed, mask, method="dilation", footprint=EIGHT) > 0
        checks.same(ours, theirs, f"scikit-image reconstruction: {what}")
        labels, _ = ndimage.label(picture > low, EIGHT)
        kept = np.unique(labels[picture > high])
        checks.same(ours, np.isin(labels, kept[kept > 0]), f"scipy label: {what}")
        edges_only = filters.apply_hysteresis_threshold(picture, low, high)
        checks.same((edges_only & ~ours).any(), False, f"scikit-image's 4-connected result lies in ours: {what}")
        if ndimage.label(picture > low, EIGHT)[1] == ndimage.label(picture > low, FOUR)[1]:
            checks.same(ours, edges_only, f"scikit-image, where both neighbourhoods agree: {what}")


def holes_up_to(binary, limit):
    """scipy's fill, undone where the hole is larger than the limit."""
    holes = ndimage.binary_fill_holes(binary, FOUR) & ~binary
    labels, count = ndimage.label(holes, FOUR)
    areas = ndimage.sum_labels(holes, labels, np.arange(count + 1))
    return binary | (holes & (areas[labels] <= limit))


def check_fill_and_regions(oracle, checks, level, name, picture):
    picture = with_black(picture)
    stored = oracle.store(picture)
    for cut in [60, 128, 190]:
        binary = picture > cut
        for limit in [0, 1, 7, 10**9]:
            what = f"above {cut}, fill {limit}: {name}, {level}"
            answer = oracle.ask("stage", level=level, element=whole(picture), threshold=["fixed", cut], fill=limit, **stored)
            checks.same(answer["binary"].reshape(picture.shape) > 0, binary, f"binary: {what}")
            filled = answer["filled"].reshape(picture.shape) > 0
            checks.same(filled, holes_up_to(binary, limit), f"fill: scipy: {what}")
            if 0 < limit < 10**9:
                theirs = morphology.remove_small_holes(np.pad(binary, 1), max_size=limit, connectivity=1)[1:-1, 1:-1]
                checks.same(filled, theirs, f"fill: scikit-image: {what}")
            check_regions(checks, answer, filled, what)


def check_regions(checks, answer, filled, what):
    labels, count = ndimage.label(filled, EIGHT)
    ours = answer["regions"]
    checks.same(len(ours), count, f"number of regions: scipy: {what}")
    checks.same(drawn(answer, filled.shape), labels, f"labels: scipy: {what}")
    theirs = measure.regionprops(labels)
    checks.same([r["area"] for r in ours], [r.area for r in theirs], f"areas: scikit-image: {what}")
    checks.same([r["box"] for r in ours], [list(r.bbox) for r in theirs], f"boxes: scikit-image: {what}")
    checks.close([r["centroid"] for r in ours], [r.centroid for r in theirs], f"centroids: scikit-image: {what}")
    for r, t in zip(ours, theirs):
        mu = cv2.moments((labels[t.slice] == t.label).astype(np.uint8), binaryImage=True)
        checks.close(r["mu"], [mu["mu20"], mu["mu11"], mu["mu02"]], f"second moments: OpenCV: {what}, region {t.label}")
        m = t.moments_central
        checks.close(r["mu"], [m[0, 2], m[1, 1], m[2, 0]], f"second moments: scikit-image: {what}, region {t.label}")
    _, cv_labels, stats, centroids = cv2.connectedComponentsWithStats(filled.astype(np.uint8), connectivity=8)
    by_area = sorted((int(s[4]), *c) for s, c in zip(stats[1:], centroids[1:]))
    checks.close(sorted((r["area"], r["centroid"][1], r["centroid"][0]) for r in ours), by_area,
                 f"areas and centroids: OpenCV: {what}")


def drawn(answer, shape):
    """The labels that the runs of our regions amount to."""
    picture = np.zeros(shape, np.int32)
    runs = answer["runs"].view("<u4").reshape(-1, 3)
    for label, region in enumerate(answer["regions"], 1):
        for y, x0, x1 in runs[slice(*region["runs"])]:
            picture[y, x0:x1] = label
    return picture


def check_coins(oracle, checks, level):
    coins = data.coins()
    stored = oracle.store(coins)
    for size, otsu in [(51, 71), (61, 73), (71, 75)]:
        answer = oracle.ask("stage", level=level, element=[size, size], threshold=["otsu", 0], fill=10**9, speck=500, **stored)
        what = f"coins, {size} px, {level}"
        checks.same(answer["level"], otsu, f"Otsu's level: {what}")
        checks.same(len(answer["regions"]), 24, f"24 coins: {what}")
        binary = ndimage.white_tophat(coins, (size, size)) > otsu
        areas = np.bincount(ndimage.label(ndimage.binary_fill_holes(binary), EIGHT)[0].ravel())[1:]
        checks.same(sorted(r["area"] for r in answer["regions"]), sorted(areas[areas >= 500]), f"areas: scipy: {what}")
        checks.same(answer["specks"], (areas < 500).sum(), f"specks: scipy: {what}")
        if size == 51:
            checks.same(sorted(r["area"] for r in answer["regions"]), COIN_AREAS, f"the 24 areas: {what}")
    flat = oracle.ask("stage", level=level, element=whole(coins), threshold=["otsu", 0], **oracle.store(with_black(coins)))
    checks.same(flat["level"], 107, f"Otsu's level of the picture itself, 107: {level}")


def check_forced_levels(program, checks, levels):
    """BELTWRIGHT_KERNELS forces a level; a name that means none is an error."""
    for level in levels:
        with Oracle(program, BELTWRIGHT_KERNELS=level) as oracle:
            checks.same(oracle.ask("levels")["chosen"], level, f"forced level {level}")
    with Oracle(program, BELTWRIGHT_KERNELS="mmx") as oracle:
        try:
            oracle.ask("levels")
        except RuntimeError as error:
            checks.same("`mmx` is not known" in str(error), True, "an unknown level is refused by name")
        else:
            checks.same("accepted", "refused", "an unknown level")


def main():
    cv2.setNumThreads(1)
    checks = Checks()
    with Oracle(sys.argv[1]) as oracle:
        answer = oracle.ask("levels")
        for level in answer["levels"]:
            before = checks.passed
            for name, picture in pictures():
                for check in [check_morphology, check_octagons, check_otsu, check_hysteresis, check_fill_and_regions]:
                    check(oracle, checks, level, name, picture)
            check_coins(oracle, checks, level)
            print(f"level {level}: {checks.passed - before} comparisons hold")
        check_forced_levels(sys.argv[1], checks, answer["levels"])
        print(f"checked {len(answer['levels'])} of {answer['built_in']} levels against scikit-image {skimage.__version__}, "
              f"OpenCV {cv2.__version__}")
    print(f"{checks.passed} passed, {len(checks.failed)} failed")
    return 1 if checks.failed else 0


if __name__ == "__main__":
    sys.exit(main())
