"""The report is valid HTML and its bounds are scipy's.

HTML: html5lib, strict: the first parse error of the WHATWG algorithm ends the check. Bounds: scipy.stats.beta.ppf on the counts
that stand in the table. Area of the curve: sklearn.metrics.roc_auc_score on the parts' own figures in the JSON of the run.
"""

import csv
import json
import pathlib
import re
import subprocess
import tempfile

import html5lib
import numpy as np
from scipy.stats import beta
from sklearn.metrics import roc_auc_score

ROOT = pathlib.Path(__file__).resolve().parents[2]
PROGRAM = ROOT / "target/release/beltwright"


def run(*args):
    done = subprocess.run([PROGRAM, *map(str, args)], capture_output=True, text=True)
    assert done.returncode == 0, done.stderr
    return done.stdout


def text(element):
    return " ".join("".join(element.itertext()).split())


def report(folder, recording, settings):
    """The parsed page and the JSON of the run."""
    page = folder / "report.html"
    seen = json.loads(run("replay", recording, "--settings", settings, "--report", page, "--json"))
    parser = html5lib.HTMLParser(strict=True, namespaceHTMLElements=False)
    return parser.parse(page.read_text()), seen


def section(page, name):
    return next(found for found in page.iter("section") if found.get("id") == name)


def percent(cell):
    return float(cell.removesuffix("%").strip()) / 100


def check_bounds(page):
    """Each bound lies on the far side of scipy's, by no more than its last digit."""
    rows = [[text(cell) for cell in row] for row in next(section(page, "agreement").iter("tbody")).iter("tr")]
    assert [row[0] for row in rows] == ["misses", "false rejects"], rows
    for name, hits, of, _, low, high in rows:
        hits, of = int(hits), int(of.split()[0])
        wanted_low = beta.ppf(0.025, hits, of - hits + 1) if hits else 0.0
        wanted_high = beta.ppf(0.975, hits + 1, of - hits) if hits < of else 1.0
        unit = 10.0 ** -len(high.removesuffix("%").strip().partition(".")[2]) / 100
        assert 0 <= percent(high) - wanted_high < unit + 1e-12, (name, high, wanted_high)
        assert 0 <= wanted_low - percent(low) < 1e-3 + 1e-12, (name, low, wanted_low)
    return rows


def check_area(page, seen, labels, limits):
    """Labels matched to the nearest part; a part's severity is the larger share of its two limits."""
    parts = [part for part in seen["parts"] if part["part"] is not None]
    where = np.array([[float(part["along_mm"]), float(part["across_mm"])] for part in parts])
    bad = np.zeros(len(parts), bool)
    for label in labels:
        nearest = np.hypot(*(where - [float(label["along_mm"]), float(label["across_mm"])]).T).argmin()
        bad[nearest] |= label["verdict"] == "reject"

    def severity(part):
        if set(part["reasons"].split("+")) & {"partial", "touching", "flipped", "unknown"}:
            return 1e9
        return max(float(part["missing_mm"]) / limits[0], float(part["excess_mm"]) / limits[1])

    wanted = roc_auc_score(bad, [severity(part) for part in parts])
    shown = float(re.search(r"false rejects: (\d\.\d+) \(1 is", text(section(page, "agreement"))).group(1))
    # The table has hundredths of a millimetre, which can tie two parts; the page rounds down to four digits.
    assert abs(shown - wanted) < 2e-3, (shown, wanted)
    return shown


def main():
    demo = ROOT / "config/oat-stars.toml"
    with tempfile.TemporaryDirectory() as name:
        folder = pathlib.Path(name)
        for scene in ("oat-stars", "gaskets"):
            page, _ = report(folder, ROOT / "demo-frames" / scene, ROOT / f"config/{scene}.toml")
            check_bounds(page)
        # Limits spoilt on purpose: misses and false rejects to count and to picture.
        recording = folder / "recording"
        run("draw", "oat-stars", "--settings", demo, "--parts", 150, "--seed", 31, "--out", recording)
        spoilt = folder / "spoilt.toml"
        shapes = (ROOT / "demo-frames/shapes").as_posix()
        spoilt.write_text(re.sub(r"(?m)^missing_mm = .*", "missing_mm = 2.7",
                                 re.sub(r"(?m)^excess_mm = .*", "excess_mm = 0.9",
                                        demo.read_text().replace("../demo-frames/shapes", shapes))))
        page, seen = report(folder, recording, spoilt)
        rows = check_bounds(page)
        assert all(int(row[1]) > 0 for row in rows), rows
        with (recording / "labels.csv").open() as file:
            area = check_area(page, seen, list(csv.DictReader(file)), (2.7, 0.9))
        for row in rows:
            print(f"   {row[0]}: {row[1]} of {row[2]}, {row[4]} to {row[5]}")
        print(f"   area under the curve {area}")
        (recording / "labels.csv").unlink()
        report(folder, recording, spoilt)
    print("reports are valid HTML, with scipy's bounds")


main()
