"""Make the demo set: pure spectra of five liquids, eight drums of recovered isopropanol and a library, all invented.

``python make.py`` writes the files beside this script, ``python make.py FOLDER`` elsewhere. The files are written
here and not by unmix, in the forms of different instruments, so that reading them is a check of the reader.
"""

import csv
import sys
from pathlib import Path
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

FloatArray = NDArray[np.float64]

SEED = 20250114
PATH_CM = 0.0025  # 25 um between the windows; the saturated drum was put into a cell ten times as long
DENSITY = {  # g/L of the pure liquid at room temperature, from memory of handbook tables
    "isopropanol": 785.0,
    "acetone": 790.0,
    "ethyl acetate": 902.0,
    "toluene": 867.0,
    "water": 998.0,
    "dichloromethane": 1325.0,
}
LISTED = ("isopropanol", "acetone", "ethyl acetate", "toluene", "water")
UNLISTED = "dichloromethane"


class Band(NamedTuple):
    """One band of a neat liquid.

    ``position`` and ``width`` (full, at half height) are in cm-1, ``height`` is the absorbance in the 25 um
    cell, ``lorentz`` the Lorentzian share of the pseudo-Voigt shape (0 a Gaussian, 1 a Lorentzian).
    """

    position: float
    width: float
    height: float
    lorentz: float


# Positions are from memory of liquid-phase spectra in the NIST WebBook and in handbooks, good to a few cm-1.
# Those marked "range" were also checked against the ranges of open course tables (UCLA WebSpectra; UMass
# organic chemistry appendix; Reusch, Virtual Textbook of Organic Chemistry): O-H of alcohols 3200-3550,
# C-H 2850-3000, aromatic C-H 3000-3100, ester C=O 1735-1750, ketone C=O 1705-1725, aromatic ring 1585-1615
# and 1475-1520, C-O 1000-1320, C-Cl 550-850 cm-1. Widths, heights and shapes are invented, and plausible but
# for one thing: real liquids absorb roughly five times as strongly, so that a real cell would be near 5 um.
BANDS = {
    "isopropanol": (
        Band(3338, 235, 1.05, 0.0),  # O-H stretch, hydrogen bonded; range
        Band(3215, 190, 0.22, 0.0),
        Band(2971, 22, 0.92, 0.6),  # CH3 stretch; range
        Band(2933, 26, 0.38, 0.6),  # range
        Band(2905, 70, 0.12, 0.2),
        Band(2883, 28, 0.40, 0.6),  # range
        Band(2728, 40, 0.015, 0.3),
        Band(2635, 70, 0.03, 0.2),
        Band(1900, 90, 0.006, 0.2),
        Band(1467, 19, 0.46, 0.6),  # CH3 deformation
        Band(1448, 26, 0.14, 0.5),
        Band(1410, 80, 0.19, 0.0),  # O-H bend in the plane
        Band(1379, 13, 0.62, 0.6),  # CH3 deformation, split by the two methyl groups
        Band(1368, 15, 0.26, 0.6),
        Band(1341, 20, 0.28, 0.6),
        Band(1310, 28, 0.36, 0.4),
        Band(1251, 22, 0.08, 0.5),
        Band(1161, 18, 0.62, 0.6),  # C-O stretch with C-C; range
        Band(1129, 20, 0.74, 0.6),  # range
        Band(1108, 17, 0.36, 0.6),  # range
        Band(951, 16, 0.98, 0.6),  # CH3 rocking
        Band(817, 15, 0.40, 0.6),  # C-C-O stretch, in phase
        Band(655, 190, 0.34, 0.0),  # O-H bend out of the plane
    ),
    "acetone": (
        Band(3414, 40, 0.025, 0.3),  # overtone of C=O
        Band(3005, 20, 0.10, 0.5),
        Band(2966, 22, 0.05, 0.5),  # range
        Band(2925, 24, 0.06, 0.5),  # range
        Band(1715, 18, 1.40, 0.6),  # C=O stretch; range
        Band(1436, 20, 0.16, 0.5),
        Band(1421, 20, 0.30, 0.5),
        Band(1363, 14, 0.85, 0.6),  # CH3 deformation beside C=O
        Band(1222, 14, 0.90, 0.6),  # C-C-C stretch
        Band(1093, 14, 0.14, 0.6),
        Band(903, 14, 0.05, 0.5),
        Band(787, 18, 0.02, 0.5),
    ),
    "ethyl acetate": (
        Band(3462, 42, 0.022, 0.3),  # overtone of C=O
        Band(2984, 20, 0.24, 0.5),  # range
        Band(2941, 24, 0.09, 0.5),  # range
        Band(2908, 26, 0.07, 0.5),  # range
        Band(2878, 20, 0.035, 0.5),  # range
        Band(1742, 21, 1.40, 0.6),  # C=O stretch; range
        Band(1465, 16, 0.12, 0.5),
        Band(1447, 20, 0.18, 0.5),
        Band(1374, 14, 0.58, 0.6),  # CH3 deformation beside C=O
        Band(1302, 24, 0.13, 0.4),
        Band(1241, 25, 1.30, 0.5),  # C-O stretch at C=O; range
        Band(1098, 18, 0.26, 0.6),
        Band(1047, 17, 0.75, 0.6),  # C-O stretch at the ethyl group; range
        Band(938, 16, 0.12, 0.6),
        Band(847, 13, 0.15, 0.6),
        Band(786, 16, 0.06, 0.6),
    ),
    "toluene": (
        Band(3087, 14, 0.20, 0.5),  # range
        Band(3062, 15, 0.30, 0.5),  # range
        Band(3027, 15, 0.46, 0.5),  # aromatic C-H stretch; range
        Band(2948, 26, 0.14, 0.5),  # range
        Band(2920, 22, 0.32, 0.5),  # CH3 stretch; range
        Band(2873, 20, 0.14, 0.5),  # range
        Band(2734, 20, 0.015, 0.5),
        Band(1942, 18, 0.06, 0.5),  # combination bands of a monosubstituted ring
        Band(1858, 18, 0.08, 0.5),
        Band(1803, 18, 0.07, 0.5),
        Band(1736, 18, 0.045, 0.5),
        Band(1605, 10, 0.20, 0.6),  # ring stretch; range
        Band(1586, 10, 0.04, 0.6),  # range
        Band(1496, 8, 0.52, 0.6),  # ring stretch; range
        Band(1460, 17, 0.22, 0.5),
        Band(1379, 12, 0.11, 0.6),
        Band(1179, 9, 0.06, 0.6),
        Band(1156, 9, 0.03, 0.6),
        Band(1082, 10, 0.18, 0.6),
        Band(1030, 9, 0.20, 0.6),
        Band(895, 10, 0.05, 0.6),
        Band(729, 8, 0.95, 0.6),  # C-H bend out of the plane, five neighbours
        Band(694, 9, 0.80, 0.6),  # ring bend
    ),
    "water": (
        Band(3585, 130, 0.50, 0.0),
        Band(3430, 235, 1.75, 0.0),  # O-H stretch
        Band(3260, 230, 1.35, 0.0),
        Band(2125, 235, 0.08, 0.1),  # bend with libration
        Band(1644, 78, 0.55, 0.5),  # H-O-H bend
        Band(680, 330, 0.80, 0.0),  # libration
    ),
    "dichloromethane": (
        Band(3054, 18, 0.08, 0.5),
        Band(2987, 16, 0.04, 0.5),
        Band(1422, 14, 0.05, 0.5),
        Band(1265, 12, 0.70, 0.6),  # CH2 wag
        Band(896, 12, 0.035, 0.5),
        Band(738, 14, 0.80, 0.6),  # C-Cl stretch; range
        Band(705, 14, 0.20, 0.6),  # range
    ),
}


#: kinds of invented compounds of the library: bands roughly where such groups absorb (the ranges named above), as
#: position, spread of the position from compound to compound, width and height relative to the strongest
KINDS = {
    "alcohol": ((3330, 15, 240, 0.7), (2960, 8, 24, 0.5), (2875, 6, 24, 0.3), (1460, 6, 20, 0.25), (1055, 40, 30, 0.8)),
    "alkane": ((2955, 3, 22, 0.7), (2924, 3, 24, 1.0), (2853, 3, 20, 0.6), (1465, 3, 16, 0.3), (1378, 3, 12, 0.2)),
    "aromatic": ((3028, 8, 14, 0.35), (1604, 6, 10, 0.25), (1496, 8, 9, 0.5), (745, 30, 10, 1.0), (696, 6, 9, 0.7)),
    "chlorinated": ((2990, 20, 16, 0.15), (1270, 20, 14, 0.5), (1215, 20, 14, 0.3), (745, 35, 18, 1.0)),
    "ester": ((2975, 10, 24, 0.2), (1742, 5, 20, 0.9), (1372, 5, 14, 0.3), (1240, 12, 26, 1.0), (1050, 20, 20, 0.5)),
    "ether": ((2960, 15, 26, 0.6), (2860, 15, 26, 0.6), (1450, 10, 18, 0.25), (1115, 20, 26, 1.0)),
    "ketone": ((2970, 10, 24, 0.2), (1715, 6, 18, 1.0), (1410, 12, 16, 0.2), (1363, 5, 14, 0.5), (1210, 25, 18, 0.5)),
}
EACH_KIND = 6


class Drum(NamedTuple):
    """What is in a drum and how it was measured.

    ``parts`` are volume fractions in the order of ``DENSITY``; ``drift`` holds offset, slope and curvature of
    the baseline (absorbance; Legendre polynomials over 650 to 4000 cm-1); ``form`` is the way it is written.
    """

    label: str
    form: str
    parts: tuple[float, float, float, float, float, float]
    drift: tuple[float, float, float]
    noise: float = 3e-4
    path_cm: float = PATH_CM
    region: tuple[float, float] = (650.0, 4000.0)
    stray_light: float = 0.0


DRUMS = (
    Drum("drum-01", "AFFN", (0.952, 0.012, 0.008, 0.004, 0.024, 0.0), (0.004, -0.002, 0.0)),
    Drum("drum-02", "DIFDUP", (0.905, 0.030, 0.022, 0.008, 0.035, 0.0), (0.002, 0.003, 0.0), noise=2e-4),
    Drum("drum-03", "CSV", (0.871, 0.018, 0.046, 0.015, 0.050, 0.0), (-0.003, 0.005, 0.0), noise=5e-4),
    # no acetone and no water at all: a zero must come out as an upper limit
    Drum("drum-04", "CSV;", (0.968, 0.0, 0.020, 0.012, 0.0, 0.0), (0.006, 0.002, 0.0)),
    # 4% dichloromethane, which is not on the list
    Drum("drum-05", "PAC", (0.900, 0.015, 0.010, 0.005, 0.030, 0.040), (0.003, -0.004, 0.0)),
    # the wrong cell, 250 um: strong bands end flat at the stray light of the instrument, A = 2.5
    Drum("drum-06", "DIFDUP", (0.930, 0.020, 0.015, 0.005, 0.030, 0.0), (0.005, 0.001, 0.0),
         path_cm=0.025, stray_light=10**-2.5),
    # a filter instrument that sees only the flanks between two carbonyl bands
    Drum("drum-07", "CSV", (0.880, 0.045, 0.050, 0.010, 0.015, 0.0), (0.008, 0.0, 0.0),
         noise=5e-4, region=(1720.0, 1740.0)),
    # the source warmed up during the scan: a bent baseline, which a straight line cannot follow
    Drum("drum-08", "AFFN", (0.920, 0.025, 0.015, 0.010, 0.030, 0.0), (0.030, 0.025, 0.020)),
)  # fmt: skip


def band_shape(axis: FloatArray, band: Band) -> FloatArray:
    """A pseudo-Voigt band on an axis in cm-1."""
    u = 2.0 * (axis - band.position) / band.width
    shape: FloatArray = (1.0 - band.lorentz) * np.exp(-np.log(2.0) * u**2) + band.lorentz / (1.0 + u**2)
    return band.height * shape


def absorptivity(name: str, axis: FloatArray) -> FloatArray:
    """Decadic absorptivity of a liquid in (g/L)-1 cm-1 on an axis in cm-1."""
    neat: FloatArray = np.sum([band_shape(axis, band) for band in BANDS[name]], axis=0)
    return neat / (DENSITY[name] * PATH_CM)


def amounts(drum: Drum) -> FloatArray:
    """Amounts in g/L in the order of ``DENSITY``, as if volumes were additive."""
    return np.array([part * density for part, density in zip(drum.parts, DENSITY.values(), strict=True)])


def measure(drum: Drum, axis: FloatArray, rng: np.random.Generator) -> FloatArray:
    """The absorbance that the instrument records: bands, baseline, stray light and noise."""
    pure = np.array([absorptivity(name, axis) for name in DENSITY])
    u = (axis - 2325.0) / 1675.0
    offset, slope, curvature = drum.drift
    baseline = offset + slope * u + curvature * (1.5 * u**2 - 0.5)
    ideal: FloatArray = amounts(drum) @ pure * drum.path_cm + baseline
    # neighbouring channels share a little of their noise, as after apodisation
    kernel = np.array([0.15, 0.70, 0.15]) / np.sqrt(0.535)
    noise = drum.noise * np.convolve(rng.standard_normal(axis.size + 2), kernel, mode="valid")
    if not drum.stray_light:
        return ideal + noise
    light = (10.0**-ideal + drum.stray_light) / (1.0 + drum.stray_light)
    recorded: FloatArray = -np.log10(light - np.log(10.0) * noise)
    return recorded


def _digits(number: int, zero_to_nine: str, minus: str) -> str:
    """An integer whose leading digit carries its sign, as JCAMP-DX packs numbers."""
    text = str(abs(number))
    first = minus[int(text[0]) - 1] if number < 0 else zero_to_nine[int(text[0])]
    return first + text[1:]


def _affn_lines(first: list[str], integers: list[int]) -> list[str]:
    return [" ".join([first[i], *map(str, integers[i : i + 8])]) for i in range(0, len(integers), 8)]


def _pac_lines(first: list[str], integers: list[int]) -> list[str]:
    return [first[i] + "".join(f"{y:+d}" for y in integers[i : i + 10]) for i in range(0, len(integers), 10)]


def _difdup_lines(first: list[str], integers: list[int]) -> list[str]:
    """Differences with repeat counts; every line starts with the last ordinate of the line before it."""
    lines = []
    start, width = 0, 20
    while start < len(integers):
        stop = min(start + width, len(integers) - 1)
        line = first[start] + _digits(integers[start], "@ABCDEFGHI", "abcdefghi")
        steps = np.diff(integers[start : stop + 1]).tolist()
        at = 0
        while at < len(steps):
            count = 1
            while at + count < len(steps) and steps[at + count] == steps[at]:
                count += 1
            line += _digits(steps[at], "%JKLMNOPQR", "jklmnopqr")
            line += _digits(count, "0STUVWXYZs", "") if count > 1 else ""
            at += count
        lines.append(line)
        start = stop if stop > start else len(integers)
    return lines


_FORMS = {"AFFN": _affn_lines, "PAC": _pac_lines, "DIFDUP": _difdup_lines}


def write_jcamp(path: Path, axis: FloatArray, values: FloatArray, labels: dict[str, str], form: str) -> None:
    """One JCAMP-DX 4.24 file, from high to low wavenumbers as infrared spectra are drawn."""
    axis, values = axis[::-1], values[::-1]
    factor = 10.0 ** np.floor(np.log10(np.abs(values).max() / 1e5))
    integers = np.rint(values / factor).astype(int).tolist()
    head = {
        "TITLE": labels["TITLE"],
        "JCAMP-DX": "4.24",
        "DATA TYPE": "INFRARED SPECTRUM",
        "ORIGIN": "invented data, made by a script",
        "OWNER": "none",
        **labels,
        "XUNITS": "1/CM",
        "XFACTOR": "1.0",
        "YFACTOR": f"{factor:.0e}",
        "FIRSTX": f"{axis[0]:.1f}",
        "LASTX": f"{axis[-1]:.1f}",
        "DELTAX": f"{axis[1] - axis[0]:.1f}",
        "NPOINTS": str(axis.size),
        "FIRSTY": f"{integers[0] * factor:.10g}",
        "XYDATA": "(X++(Y..Y))",
    }
    lines = [f"##{name}= {value}" for name, value in head.items()]
    lines += _FORMS[form]([f"{x:.1f}" for x in axis], integers)
    path.write_text("\n".join([*lines, "##END=", ""]), encoding="ascii", newline="\n")


def write_table(
    path: Path, axis: FloatArray, values: FloatArray, head: list[str], *, continental: bool = False
) -> None:
    """Two columns under lines of headings; ``continental`` is semicolons between columns, commas for decimals."""
    lines = [f"{x:.1f},{y:.6f}" for x, y in zip(axis, values, strict=True)]
    text = "\n".join([*head, *lines, ""])
    if continental:
        text = text.replace(",", ";").replace(".", ",")
    path.write_text(text, encoding="ascii", newline="\n")


def write_pure(folder: Path) -> None:
    """The five listed liquids every 1 cm-1, between the channels of the drums: they must be interpolated."""
    axis = np.arange(649.5, 4001.0)
    for name in LISTED:
        values = absorptivity(name, axis)
        stem = name.replace(" ", "_")
        if name == "water":
            write_table(folder / f"{stem}.csv", axis, values, [f"Wavenumber (cm-1),{name} ((g/L)-1 cm-1)"])
        else:
            form = "AFFN" if name == "toluene" else "DIFDUP"
            labels = {"TITLE": name, "YUNITS": "(g/L)-1 cm-1 (base 10)"}
            write_jcamp(folder / f"{stem}.jdx", axis, values, labels, form)


def write_library(path: Path) -> None:
    """A library in one table every 2 cm-1: the six liquids, and compounds that do not exist."""
    axis = np.arange(649.0, 4002.0, 2.0)
    rng = np.random.default_rng([SEED, 1000])
    columns = {name: absorptivity(name, axis) for name in DENSITY}
    for kind, bands in KINDS.items():
        for number in range(1, EACH_KIND + 1):
            drawn = []
            for at, spread, width, height in bands:
                size = height * rng.lognormal(-0.4, 0.35)
                drawn.append(Band(at + spread * rng.normal(), width * rng.lognormal(0, 0.15), size, 0.5))
            drawn += [Band(rng.uniform(700, 1500), rng.lognormal(2.6, 0.3), 0.1 * rng.lognormal(0, 0.8), 0.5)
                      for _ in range(rng.integers(4, 10))]  # fmt: skip
            neat = np.sum([band_shape(axis, band) for band in drawn], axis=0)
            columns[f"{kind} {number}"] = neat / (rng.uniform(750, 1300) * PATH_CM)
    head = ",".join(["Wavenumber (cm-1)", *(f"{name} ((g/L)-1 cm-1)" for name in columns)])
    table = np.array(list(columns.values())).T
    lines = [",".join([f"{x:.0f}", *(f"{y:.3e}" for y in row)]) for x, row in zip(axis, table, strict=True)]
    path.write_text("\n".join([head, *lines, ""]), encoding="ascii", newline="\n")


def write_drums(folder: Path) -> None:
    """The eight drums every 2 cm-1, each with random numbers of its own so that one can change alone."""
    axis = np.arange(650.0, 4001.0, 2.0)
    for index, drum in enumerate(DRUMS):
        inside = axis[(axis >= drum.region[0]) & (axis <= drum.region[1])]
        values = measure(drum, inside, np.random.default_rng([SEED, index]))
        if drum.form in _FORMS:
            labels = {"TITLE": drum.label, "PATHLENGTH": f"{drum.path_cm:g} cm", "YUNITS": "ABSORBANCE"}
            write_jcamp(folder / f"{drum.label}.jdx", inside, values, labels, drum.form)
        else:
            head = [f"Sample,{drum.label}", "Path length,25 um", "Wavenumber (cm-1),Absorbance"]
            table = folder / f"{drum.label}.csv"
            write_table(table, inside, values, head, continental=drum.form == "CSV;")


def write_truth(path: Path) -> None:
    """What is in each drum, in g/L."""
    with path.open("w", encoding="ascii", newline="") as file:
        rows = csv.writer(file, lineterminator="\n")
        rows.writerow(["sample", *LISTED, "unlisted", "unlisted compound", "unit"])
        for drum in DRUMS:
            found = [f"{amount:.3f}" for amount in amounts(drum)]
            rows.writerow([drum.label, *found, UNLISTED if drum.parts[-1] else "", "g/L"])


def main(folder: Path) -> None:
    """Write the whole set into a folder."""
    for name in ("pure", "drums", "library"):
        (folder / name).mkdir(parents=True, exist_ok=True)
    write_pure(folder / "pure")
    write_drums(folder / "drums")
    write_library(folder / "library" / "library.csv")
    write_truth(folder / "truth.csv")


if __name__ == "__main__":
    main(Path(sys.argv[1]) if len(sys.argv) > 1 else Path(__file__).parent)
