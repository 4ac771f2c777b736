"""Proof that the published check values can fail: one sign is broken at a time in a copy of the package.

Run by hand, not by pytest (about a minute)::

    python -P tests/design/sign_flips.py

Prints, for each row, which broken signs it notices; exits with 1 when a row notices none.
"""

import os
import re
import shutil
import subprocess
import sys
import tempfile
from pathlib import Path

HOUSE = Path(__file__).resolve().parents[2]
TESTS = sorted(
    str(path)
    for name in ("locus", "dead_time", "tuning", "second_order")
    for path in HOUSE.glob(f"tests/design/test_published_{name}.py")
)
FLIPS = {
    "dead time leads": ("design/locus/loop.py", "np.exp(-s * self.dead_time)", "np.exp(s * self.dead_time)"),
    "dead time turns the wrong way": (
        "design/locus/enclosure.py",
        "delayed = -turning.delay",
        "delayed = turning.delay",
    ),
    "angle of 0 in place of 180 deg": (
        "design/locus/enclosure.py",
        "np.angle(-loop.at(path.at(middle)))",
        "np.angle(loop.at(path.at(middle)))",
    ),
    "poles turn as zeros": ("design/locus/enclosure.py", "-np.ones(poles.size)", "np.ones(poles.size)"),
    "angle residual": ("design/locus/condition.py", "np.angle(-complex(loop.at(s)))", "np.angle(complex(loop.at(s)))"),
    "gain turned over": (
        "design/locus/condition.py",
        "0.0 if not math.isfinite(size) else 1.0 / size",
        "0.0 if not math.isfinite(size) else size",
    ),
    "static gain": ("design/locus/loop.py", "return self.numerator[-1] /", "return -self.numerator[-1] /"),
    "breakaway equation": (
        "design/locus/special_points.py",
        "slopes: FloatArray = np.polysub(",
        "slopes: FloatArray = np.polyadd(",
    ),
    "gain of a breakaway point": (
        "design/locus/special_points.py",
        "(-1.0 / complex(loop.at(s)))",
        "(1.0 / complex(loop.at(s)))",
    ),
    "G_L taken at -s": (
        "design/locus/loop.py",
        "s = np.asarray(s, dtype=np.complex128)\n        value = np.polyval(self.numerator",
        "s = -np.asarray(s, dtype=np.complex128)\n        value = np.polyval(self.numerator",
    ),
    "departure: angles of the poles": (
        "design/locus/departure.py",
        "- np.sum(np.angle(pole - others))",
        "+ np.sum(np.angle(pole - others))",
    ),
    "centroid": (
        "design/locus/special_points.py",
        "(np.sum(poles) - np.sum(zeros)).real / surplus",
        "(np.sum(zeros) - np.sum(poles)).real / surplus",
    ),
    "closed-loop polynomial": (
        "design/locus/roots.py",
        "np.polyadd(loop.denominator, loop_gain",
        "np.polysub(loop.denominator, loop_gain",
    ),
    "sensitivity": ("design/margins.py", "np.abs(1.0 / (1.0 + curve))", "np.abs(1.0 / (1.0 - curve))"),
    "complementary sensitivity": (
        "design/margins.py",
        "np.abs(curve / (1.0 + curve))",
        "np.abs(curve / (1.0 - curve))",
    ),
    "phase margin": ("design/margins.py", "np.angle(-loop.at(1j * crossovers))", "np.angle(loop.at(1j * crossovers))"),
    "crossover level": ("design/margins.py", "level = np.log(loop_gain * ", "level = np.log(1.0 / loop_gain * "),
    "damping of an overshoot": (
        "design/locus/wish.py",
        "decrement = -math.log(overshoot)",
        "decrement = math.log(overshoot)",
    ),
    "zero of the angle condition": (
        "design/locus/wish.py",
        "math.tan(math.radians(wanted)) - s.real)",
        "math.tan(math.radians(wanted)) + s.real)",
    ),
    "direction of a crossing": ("design/locus/crossings.py", "1 if turn < 0.0 else -1", "-1 if turn < 0.0 else 1"),
}
ROW = re.compile(r"(?:test_((?:rl|so|dt|tu|fr)_\d+)|\[(TU-\d+) )", re.IGNORECASE)


def outcome(package: Path) -> tuple[set[str], set[str]]:
    """Rows that passed and rows that failed with the package of that folder."""
    command = [sys.executable, "-P", "-m", "pytest", *TESTS, "-q", "-rA", "--tb=no", "-p", "no:cacheprovider"]
    environment = {
        **os.environ,
        "PYTHONPATH": str(package),
        "OPENBLAS_NUM_THREADS": "1",
        "PYTHONDONTWRITEBYTECODE": "1",
    }
    ran = subprocess.run(command, capture_output=True, text=True, cwd=HOUSE, env=environment, timeout=300, check=False)
    rows: dict[str, set[str]] = {"PASSED": set(), "FAILED": set()}
    for line in ran.stdout.splitlines():
        verdict, _, rest = line.partition(" ")
        found = ROW.search(rest)
        if verdict in rows and found:
            rows[verdict].add((found.group(1) or found.group(2)).upper().replace("_", "-"))
    return rows["PASSED"] - rows["FAILED"], rows["FAILED"]


def copied(folder: Path) -> Path:
    """ident and design as plain packages in a folder that goes first on the path."""
    package = folder / "gainwright"
    for name in ("ident", "design"):
        shutil.copytree(HOUSE / name, package / name, ignore=shutil.ignore_patterns("__pycache__"))
    (package / "__init__.py").write_text("")
    return package


def main() -> int:
    noticed: dict[str, list[str]] = {}
    with tempfile.TemporaryDirectory() as place:
        package = copied(Path(place))
        passed, failed = outcome(Path(place))
        print(f"unbroken: {len(passed)} rows pass, {len(failed)} fail")
        if failed or not passed:
            return 1
        for name, (file, right, wrong) in FLIPS.items():
            source = package / file
            text = source.read_text()
            if text.count(right) < 1:
                print(f"{name}: the text to break is gone from {file}")
                return 1
            source.write_text(text.replace(right, wrong))
            _, failing = outcome(Path(place))
            source.write_text(text)
            print(f"{name}: {len(failing)} rows fail", flush=True)
            for row in failing:
                noticed.setdefault(row, []).append(name)
    for row in sorted(passed):
        print(f"{row}: {', '.join(noticed.get(row, ['NOTICES NOTHING']))}")
    blind = sorted(passed - set(noticed))
    print(f"{len(passed) - len(blind)} of {len(passed)} rows notice a broken sign; blind: {blind}")
    return 1 if blind else 0


if __name__ == "__main__":
    sys.exit(main())
