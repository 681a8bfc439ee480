"""Condition indices and variance-decomposition proportions against printed ones.

Belsley, Kuh and Welsch, Regression Diagnostics (1980), chapter 3: columns scaled to unit length, the intercept
included, nothing centred.
"""

import numpy as np
import pytest

from unmix.diagnose.conditioning import dependent_groups, design_figures
from unmix.kernels.linalg import collinearity


def with_intercept(columns):
    columns = np.asarray(columns, dtype=float)
    return np.column_stack([np.ones(columns.shape[0]), columns])


#: displacement, gross horsepower, weight (1000 lb), rear axle ratio of 32 cars: data set `mtcars` of R (from H. V.
#: Henderson and P. F. Velleman, Biometrics 37 (1981) 391); typed from memory, proven by the ten printed digits below
CARS = [
    (160, 110, 2.620, 3.90), (160, 110, 2.875, 3.90), (108, 93, 2.320, 3.85), (258, 110, 3.215, 3.08),
    (360, 175, 3.440, 3.15), (225, 105, 3.460, 2.76), (360, 245, 3.570, 3.21), (146.7, 62, 3.190, 3.69),
    (140.8, 95, 3.150, 3.92), (167.6, 123, 3.440, 3.92), (167.6, 123, 3.440, 3.92), (275.8, 180, 4.070, 3.07),
    (275.8, 180, 3.730, 3.07), (275.8, 180, 3.780, 3.07), (472, 205, 5.250, 2.93), (460, 215, 5.424, 3.00),
    (440, 230, 5.345, 3.23), (78.7, 66, 2.200, 4.08), (75.7, 52, 1.615, 4.93), (71.1, 65, 1.835, 4.22),
    (120.1, 97, 2.465, 3.70), (318, 150, 3.520, 2.76), (304, 150, 3.435, 3.15), (350, 245, 3.840, 3.73),
    (400, 175, 3.845, 3.08), (79, 66, 1.935, 4.08), (120.3, 91, 2.140, 4.43), (95.1, 113, 1.513, 3.77),
    (351, 264, 3.170, 4.22), (145, 175, 2.770, 3.62), (301, 335, 3.570, 3.54), (121, 109, 2.780, 4.11),
]  # fmt: skip

#: printed by the R package olsrr (found): eigenvalue, index, proportions of intercept, disp, hp, wt, drat
CARS_PRINTED = np.array([
    (4.692806914, 1.000000, 0.0002323252, 0.001106455, 0.002566185, 0.0007172086, 0.0003775503),
    (0.240308641, 4.419078, 0.0036813894, 0.034132904, 0.031334562, 0.0009394254, 0.0148250672),
    (0.052153430, 9.485821, 0.0009192095, 0.058394262, 0.735003722, 0.0700789813, 0.0026259361),
    (0.011406889, 20.283026, 0.0014476535, 0.885725642, 0.207337511, 0.7179834661, 0.0568226912),
    (0.003324127, 37.573144, 0.9937194224, 0.020640737, 0.023758021, 0.2102809185, 0.9253487552),
])  # fmt: skip


def test_cars_to_all_printed_digits():
    found = collinearity(with_intercept(CARS))
    assert found.indices == pytest.approx(CARS_PRINTED[:, 1], abs=5.1e-7)
    # the scaled columns have eigenvalues that add up to their number; index = sqrt(largest / each)
    assert 4.692806914 / found.indices**2 == pytest.approx(CARS_PRINTED[:, 0], abs=1e-9)
    for mine, printed in zip(found.proportion.T, CARS_PRINTED[:, 2:].T, strict=True):
        assert mine == pytest.approx(printed, rel=1e-6)


def test_cars_variance_inflation():
    # printed by the same package: centred columns, so the baseline term of order 0 stands for the intercept
    found = design_figures(np.array(CARS, dtype=float), np.ones((32, 1)))
    length = np.linalg.norm(CARS, axis=0) / np.linalg.norm(np.array(CARS) - np.mean(CARS, axis=0), axis=0)
    assert found.inflation / length**2 == pytest.approx([8.209402, 2.894373, 5.096601, 2.279547], abs=5.1e-7)


#: age, weight, oxygen, run time, resting, running and maximum pulse of 31 men: `fitness` of the documentation of
#: SAS/STAT, PROC REG (sample file found); printed indices and proportions from memory, five decimals
FITNESS = np.array([
    (44, 89.47, 44.609, 11.37, 62, 178, 182), (40, 75.07, 45.313, 10.07, 62, 185, 185),
    (44, 85.84, 54.297, 8.65, 45, 156, 168), (42, 68.15, 59.571, 8.17, 40, 166, 172),
    (38, 89.02, 49.874, 9.22, 55, 178, 180), (47, 77.45, 44.811, 11.63, 58, 176, 176),
    (40, 75.98, 45.681, 11.95, 70, 176, 180), (43, 81.19, 49.091, 10.85, 64, 162, 170),
    (44, 81.42, 39.442, 13.08, 63, 174, 176), (38, 81.87, 60.055, 8.63, 48, 170, 186),
    (44, 73.03, 50.541, 10.13, 45, 168, 168), (45, 87.66, 37.388, 14.03, 56, 186, 192),
    (45, 66.45, 44.754, 11.12, 51, 176, 176), (47, 79.15, 47.273, 10.60, 47, 162, 164),
    (54, 83.12, 51.855, 10.33, 50, 166, 170), (49, 81.42, 49.156, 8.95, 44, 180, 185),
    (51, 69.63, 40.836, 10.95, 57, 168, 172), (51, 77.91, 46.672, 10.00, 48, 162, 168),
    (48, 91.63, 46.774, 10.25, 48, 162, 164), (49, 73.37, 50.388, 10.08, 67, 168, 168),
    (57, 73.37, 39.407, 12.63, 58, 174, 176), (54, 79.38, 46.080, 11.17, 62, 156, 165),
    (52, 76.32, 45.441, 9.63, 48, 164, 166), (50, 70.87, 54.625, 8.92, 48, 146, 155),
    (51, 67.25, 45.118, 11.08, 48, 172, 172), (54, 91.63, 39.203, 12.88, 44, 168, 172),
    (51, 73.71, 45.790, 10.47, 59, 186, 188), (57, 59.08, 50.545, 9.93, 49, 148, 155),
    (49, 76.32, 48.673, 9.40, 56, 186, 188), (48, 61.24, 47.920, 11.50, 52, 170, 176),
    (52, 82.78, 47.467, 10.50, 53, 170, 172),
])  # fmt: skip


def test_fitness_to_five_decimals():
    # intercept, run time, age, weight, running, maximum and resting pulse
    found = collinearity(with_intercept(FITNESS[:, [3, 0, 1, 5, 6, 4]]))
    assert found.indices == pytest.approx([1, 19.29087, 21.50072, 27.62115, 33.82918, 82.63757, 196.78560], abs=5.1e-6)
    last = [0.18981, 0.01455, 0.06210, 0.02283, 0.91277, 0.98357, 0.00568]
    before = [0.79966, 0.09746, 0.49660, 0.10330, 0.06948, 0.00561, 0.02026]
    assert found.proportion[6] == pytest.approx(last, abs=5.1e-6)
    assert found.proportion[5] == pytest.approx(before, abs=5.1e-6)


def test_fitness_dependence_is_named():
    # the two pulses share the largest index (0.913 and 0.984)
    groups = dependent_groups(design_figures(FITNESS[:, [3, 0, 1, 5, 6, 4]], np.ones((31, 1))), 6)
    assert (196.7856, [3, 4]) in [(round(index, 4), members) for index, members in groups]


#: deflator, gross national product, unemployed, armed forces, population, year: J. W. Longley, J. Am. Stat. Assoc. 62
#: (1967) 819, as in R; typed from memory, proven by the indices. The largest is widely printed as 43275
LONGLEY = [
    (83.0, 234.289, 235.6, 159.0, 107.608, 1947), (88.5, 259.426, 232.5, 145.6, 108.632, 1948),
    (88.2, 258.054, 368.2, 161.6, 109.773, 1949), (89.5, 284.599, 335.1, 165.0, 110.929, 1950),
    (96.2, 328.975, 209.9, 309.9, 112.075, 1951), (98.1, 346.999, 193.2, 359.4, 113.270, 1952),
    (99.0, 365.385, 187.0, 354.7, 115.094, 1953), (100.0, 363.112, 357.8, 335.0, 116.219, 1954),
    (101.2, 397.469, 290.4, 304.8, 117.388, 1955), (104.6, 419.180, 282.2, 285.7, 118.734, 1956),
    (108.4, 442.769, 293.6, 279.8, 120.445, 1957), (110.8, 444.546, 468.1, 263.7, 121.950, 1958),
    (112.6, 482.704, 381.3, 255.2, 123.366, 1959), (114.2, 502.601, 393.1, 251.4, 125.368, 1960),
    (115.7, 518.173, 480.6, 257.2, 127.852, 1961), (116.9, 554.894, 400.7, 282.7, 130.081, 1962),
]  # fmt: skip


def test_longley():
    found = collinearity(with_intercept(LONGLEY)).indices
    assert found == pytest.approx([1, 9.14172052, 12.2557351, 25.3366071, 230.423946, 1048.0803, 43275.0436], rel=1e-8)
    assert round(found[-1]) == 43275


#: the modified Bauer matrix, Belsley, Kuh and Welsch, section 3.2, from memory; column 5 is twice column 4
BAUER = np.array([
    (-74, 80, 18, -56, -112), (14, -69, 21, 52, 104), (66, -72, -5, 764, 1528),
    (-12, 66, -30, 4096, 8192), (3, 8, -7, -13276, -26552), (4, -12, 4, 8421, 16842),
], dtype=float)  # fmt: skip


def test_an_exact_dependence_does_not_hide_a_weaker_one():
    found = collinearity(BAUER)
    assert found.indices[:4] == pytest.approx([1, 1.03853842, 1.32577503, 15.9971009], rel=1e-8)
    assert found.indices[4] > 1e14
    assert found.proportion[3, :3] == pytest.approx([0.994, 0.994, 0.953], abs=5.1e-4)
    assert found.proportion[4, 3:] == pytest.approx([1.0, 1.0], abs=1e-6)
    ((_, members),) = dependent_groups(design_figures(BAUER, np.empty((6, 0))), 5)
    assert members == [3, 4]
