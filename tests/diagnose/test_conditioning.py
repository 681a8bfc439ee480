"""Figures of a design against their definitions, and who is confused with whom."""

import numpy as np
import pytest

from unmix.diagnose.conditioning import dependent_groups, design_figures
from unmix.diagnose.limits import limits
from unmix.kernels.linalg import polynomial_terms

AXIS = np.linspace(0.0, 1.0, 200)
NONE = np.empty((200, 0))


def bands(*places, width=0.06):
    return np.column_stack([np.exp(-(((AXIS - at) / width) ** 2)) for at in places])


def net_signal(signal, free, j):
    """Lorber's definition: what is left of a pure spectrum when all else has been projected out."""
    others = np.column_stack([np.delete(signal, j, axis=1), free])
    return signal[:, j] - others @ np.linalg.lstsq(others, signal[:, j], rcond=None)[0]


@pytest.mark.parametrize("order", [None, 0, 2])
def test_net_signal_selectivity_and_inflation_follow_their_definitions(order):
    signal, free = bands(0.3, 0.37, 0.7) * [1e-3, 5.0, 1e3], polynomial_terms(AXIS, order)
    found = design_figures(signal, free)
    for j in range(3):
        net = net_signal(signal, free, j)
        assert found.net[j] == pytest.approx(net, rel=1e-6, abs=1e-9 * np.abs(net).max())
        share = np.linalg.norm(net) / np.linalg.norm(signal[:, j])
        assert found.selectivity[j] == pytest.approx(share, rel=1e-9)
        assert found.inflation[j] == pytest.approx(1 / share**2, rel=1e-9)
        assert found.unit_uncertainty[j] == pytest.approx(1 / np.linalg.norm(net), rel=1e-9)


def test_detection_limit_is_that_of_the_net_analyte_signal():
    # 2 t s0 with t = 1.645 is 3.29 s0, and s0 = sigma / ||net analyte signal||
    signal, free = bands(0.3, 0.37, 0.7), polynomial_terms(AXIS, 1)
    found = design_figures(signal, free)
    sigma = 2e-4
    limit = limits(sigma * found.unit_uncertainty, np.asarray(np.inf)).detection
    sensitivity = [np.linalg.norm(net_signal(signal, free, j)) for j in range(3)]
    assert limit == pytest.approx(3.3 * sigma / np.array(sensitivity), rel=4e-3)


def test_angles_of_known_vectors():
    t = np.radians([0.0, 30.0, 90.0])
    found = design_figures(np.vstack([np.cos(t), np.sin(t)]) * [2.0, 1.0, 5.0], np.empty((2, 0)))
    assert found.angle == pytest.approx(np.array([[0, 30, 90], [30, 0, 60], [90, 60, 0]]), abs=1e-6)


def test_a_tiny_angle_keeps_its_digits():
    t = np.array([0.0, 1e-9])
    found = design_figures(np.vstack([np.cos(t), np.sin(t)]), np.empty((2, 0)))
    assert found.angle[0, 1] == pytest.approx(np.degrees(1e-9), rel=1e-6)


def test_baseline_is_taken_out_of_the_angle():
    signal = bands(0.3, 0.7)
    lifted = signal + 5.0  # on an offset the two look alike
    offset = polynomial_terms(AXIS, 0)
    assert design_figures(lifted, NONE).angle[0, 1] < 10.0
    seen, own = design_figures(lifted, offset).angle[0, 1], design_figures(signal, offset).angle[0, 1]
    assert seen == pytest.approx(own, abs=1e-6)


def test_partner_is_the_overlapping_component():
    found = design_figures(bands(0.3, 0.32, 0.8), NONE)
    assert found.partner == [1, 0, -1]


def test_partner_of_a_single_component_is_nobody():
    assert design_figures(bands(0.3), NONE).partner == [-1]


def test_separate_components_are_in_no_group():
    assert dependent_groups(design_figures(bands(0.2, 0.5, 0.8), polynomial_terms(AXIS, 1)), 3) == []


def test_near_twins_are_a_group_and_the_bystander_is_not():
    ((index, members),) = dependent_groups(design_figures(bands(0.3, 0.302, 0.8), NONE), 3)
    assert members == [0, 1]
    assert index > 30


def test_exact_twins_are_a_group_and_the_bystander_is_not():
    signal = bands(0.3, 0.3, 0.8) * [1.0, 7.0, 1.0]
    found = design_figures(signal, NONE)
    ((index, members),) = dependent_groups(found, 3)
    assert members == [0, 1]
    assert index > 1e12
    assert found.selectivity[:2] == pytest.approx([0.0, 0.0])
    assert found.selectivity[2] == pytest.approx(1.0, abs=1e-3)
    assert np.isinf(found.unit_uncertainty).tolist() == [True, True, False]
    assert np.isfinite(found.net).all()


def test_three_that_add_up_are_one_group():
    signal = bands(0.2, 0.5, 0.8, 0.9)
    signal[:, 2] = signal[:, 0] + signal[:, 1] + 1e-5 * np.sin(20 * AXIS)
    ((_, members),) = dependent_groups(design_figures(signal, NONE), 4)
    assert members == [0, 1, 2]


def test_a_component_that_the_baseline_can_imitate_is_a_group_by_itself():
    signal = np.column_stack([bands(0.3)[:, 0], 0.5 + AXIS + 1e-4 * bands(0.6)[:, 0]])
    ((_, members),) = dependent_groups(design_figures(signal, polynomial_terms(AXIS, 1)), 2)
    assert members == [1]
    assert dependent_groups(design_figures(signal, NONE), 2) == []


def test_two_pairs_of_twins_are_all_named(rng):
    groups = dependent_groups(design_figures(bands(0.2, 0.2002, 0.7, 0.7005), NONE), 4)
    assert sorted(j for _, members in groups for j in members) == [0, 1, 2, 3]
