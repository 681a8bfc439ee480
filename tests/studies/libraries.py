"""Invented libraries of infrared spectra in which compounds of a class are alike, and mixtures out of them."""

from dataclasses import dataclass

import numpy as np

AXIS = np.arange(650.0, 4000.5, 2.0)

#: class -> (position, spread of the position from compound to compound, width, height), roughly where such groups
#: absorb; heights are relative to the strongest band
CLASSES = {
    "alkane": [(2955, 3, 22, 0.7), (2924, 3, 24, 1.0), (2853, 3, 20, 0.6), (1465, 3, 16, 0.3), (1378, 3, 12, 0.2),
               (722, 5, 12, 0.08)],
    "alcohol": [(3330, 15, 240, 0.7), (2960, 8, 24, 0.5), (2875, 6, 24, 0.3), (1460, 6, 20, 0.25), (1378, 5, 14, 0.25),
                (1055, 40, 30, 0.8)],
    "ketone": [(2970, 10, 24, 0.2), (1715, 6, 18, 1.0), (1410, 12, 16, 0.2), (1363, 5, 14, 0.5), (1210, 25, 18, 0.5)],
    "ester": [(2975, 10, 24, 0.2), (1742, 5, 20, 0.9), (1372, 5, 14, 0.3), (1240, 12, 26, 1.0), (1050, 20, 20, 0.5)],
    "acid": [(3050, 60, 500, 0.5), (1712, 6, 30, 1.0), (1415, 12, 24, 0.3), (1285, 20, 34, 0.5), (935, 15, 50, 0.25)],
    "aromatic": [(3062, 10, 14, 0.25), (3028, 8, 14, 0.35), (1604, 6, 10, 0.25), (1496, 8, 9, 0.5), (1030, 10, 9, 0.25),
                 (745, 30, 10, 1.0), (696, 6, 9, 0.7)],
    "ether": [(2960, 15, 26, 0.6), (2860, 15, 26, 0.6), (1450, 10, 18, 0.25), (1115, 20, 26, 1.0)],
    "chlorinated": [(2990, 20, 16, 0.15), (1270, 20, 14, 0.5), (1215, 20, 14, 0.3), (745, 35, 18, 1.0)],
    "amine": [(3350, 25, 60, 0.2), (2950, 15, 26, 0.7), (2820, 15, 26, 0.4), (1610, 12, 40, 0.35), (1090, 30, 26, 0.5),
              (800, 30, 60, 0.6)],
    "amide": [(3300, 30, 120, 0.5), (1660, 12, 40, 1.0), (1550, 12, 34, 0.6), (1260, 20, 26, 0.3)],
}  # fmt: skip


def library(rng, n, axis=AXIS):
    """Spectra of n compounds: the bands of their class, a little moved, and a fingerprint of their own."""
    kinds = list(CLASSES)
    spectra = np.zeros((n, axis.size))
    names = []
    for i in range(n):
        kind = kinds[i % len(kinds)]
        names.append(f"{kind} {i // len(kinds) + 1}")
        bands = [
            (p + s * rng.normal(), w * rng.lognormal(0, 0.15), h * rng.lognormal(0, 0.35))
            for p, s, w, h in CLASSES[kind]
        ]
        for _ in range(rng.integers(4, 13)):
            bands.append((rng.uniform(680, 1500), rng.lognormal(np.log(14), 0.3), rng.lognormal(-1.8, 0.8)))
        for position, width, height in bands:
            u = (axis - position) / width
            spectra[i] += height * (0.5 * np.exp(-4 * np.log(2) * u**2) + 0.5 / (1 + 4 * u**2))
        spectra[i] /= spectra[i].max()
    return spectra, names


@dataclass
class Mixture:
    """One sample: its spectrum, its members and their amounts, the standard deviation of its noise."""

    y: np.ndarray
    members: tuple[int, ...]
    amounts: np.ndarray
    noise: float


def mixture(rng, spectra, size, noise_of, *, drift=0.05, weakest=5.0, axis=AXIS):
    """A mixture of some members, amounts over two decades, the baseline drifting, noise under the weakest band.

    The strongest band of the weakest member is ``weakest`` times the noise or (half of the time) up to ten times that.
    """
    members = tuple(sorted(rng.choice(len(spectra), size, replace=False).tolist()))
    amounts = 10.0 ** rng.uniform(-2, 0, size)
    amounts /= amounts.max()
    noise = amounts.min() / weakest / 10.0 ** max(rng.uniform(-1, 1), 0.0)
    at = np.linspace(-1, 1, axis.size)
    baseline = (rng.normal(size=3) * [drift, drift, drift / 2]) @ np.polynomial.legendre.legvander(at, 2).T
    y = amounts @ spectra[list(members)] + baseline + noise * noise_of(rng, axis.size)
    return Mixture(y, members, amounts, noise)
