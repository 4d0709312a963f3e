"""Propagation of doubt: the published examples of JCGM 100 and JCGM 101, and what else the formulas must give."""

from __future__ import annotations

from math import log, sqrt

import numpy as np
import pytest
from numpy.testing import assert_allclose

from fluxmesh.assess.doubt.draws import draw_inputs, summarise
from fluxmesh.assess.doubt.inputs import NORMAL_95, Input, covariance_of, propagate, sensitivity
from fluxmesh.errors import FieldError
from tests.verification import Verify

MILLION = 1_000_000


def normal(name: str, value: float, standard: float) -> Input:
    return Input(name, value, NORMAL_95 * standard)


def rectangular(name: str, low: float, high: float) -> Input:
    return Input(name, (low + high) / 2, (high - low) / 2, shape="rectangular")


# ---- JCGM 100:2008, H.2: resistance and reactance from correlated readings -------------------

VOLTS = np.array([5.007, 4.994, 5.005, 4.990, 4.999])
MILLIAMPERES = np.array([19.663, 19.639, 19.640, 19.685, 19.678])
RADIANS = np.array([1.0456, 1.0438, 1.0468, 1.0428, 1.0433])


def impedance(x: np.ndarray) -> np.ndarray:
    volts, amperes, phase = x
    return volts / amperes * np.array([np.cos(phase), np.sin(phase), np.ones_like(phase)])


def readings() -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    data = np.array([VOLTS, MILLIAMPERES / 1000, RADIANS])
    standard = data.std(axis=1, ddof=1) / sqrt(data.shape[1])
    return data.mean(axis=1), standard, np.corrcoef(data)


def test_correlated_readings_of_jcgm_100_h2(verify: Verify) -> None:
    mean, standard, correlation = readings()
    assert_allclose(correlation[[0, 0, 1], [1, 2, 2]], [-0.36, 0.86, -0.65], atol=0.006)  # table H.2
    slope = sensitivity(impedance, mean, standard)
    told = propagate(slope.linear, correlation)
    # table H.3 prints 127.732(71), 219.847(295), 254.260(236); the further digits follow from the same data
    assert_allclose(slope.value, [127.7321699, 219.8465119, 254.2597019], rtol=1e-9)
    assert_allclose(told.standard, [0.0710714, 0.2955817, 0.2363361], rtol=2e-6)
    r = told.correlation
    assert_allclose([r[0, 1], r[0, 2], r[1, 2]], [-0.5884298, -0.4852592, 0.9925117], rtol=1e-5)
    verify(
        what="Resistance, reactance and impedance from correlated readings",
        source="JCGM 100:2008, H.2, table H.3",
        expected=(127.732, 219.847, 254.260),
        got=slope.value,
        unit="ohm",
        tolerance=6e-4,
        why="printed with three decimals",
        kind="uncertainty",
    )
    verify(
        what="Resistance, reactance and impedance from correlated readings: standard uncertainties",
        source="JCGM 100:2008, H.2, table H.3",
        expected=(0.071, 0.295, 0.236),
        got=told.standard,
        unit="ohm",
        tolerance=6e-4,
        why="printed with three decimals",
        kind="uncertainty",
    )
    verify(
        what="Resistance, reactance and impedance from correlated readings: their correlations",
        source="JCGM 100:2008, H.2, table H.3",
        expected=(-0.588, -0.485, 0.993),
        got=(r[0, 1], r[0, 2], r[1, 2]),
        tolerance=6e-4,
        why="printed with three decimals",
        kind="uncertainty",
    )


def test_correlations_matter_in_jcgm_100_h2() -> None:
    mean, standard, _ = readings()
    alone = propagate(sensitivity(impedance, mean, standard).linear).standard
    assert_allclose(alone, [0.195, 0.201, 0.204], rtol=0.02)  # far from 0.071, 0.296, 0.236


def test_correlated_draws_have_their_covariance_and_agree_with_the_linear_law() -> None:
    mean, standard, correlation = readings()
    inputs = [normal(name, *pair) for name, pair in zip("VIp", zip(mean, standard))]
    drawn = draw_inputs(inputs, 200_000, seed=4, correlation=correlation)
    assert_allclose(np.corrcoef(drawn.T), correlation, atol=0.01)
    assert_allclose(impedance(drawn.T).std(axis=1), [0.0710714, 0.2955817, 0.2363361], rtol=0.01)


def test_matrices_that_are_no_correlations_are_refused() -> None:
    with pytest.raises(FieldError, match="symmetric"):
        covariance_of([1.0, 1.0], [[1.0, 0.5], [0.4, 1.0]])
    with pytest.raises(FieldError, match="contradict"):
        covariance_of([1.0] * 3, [[1, 0.9, -0.9], [0.9, 1, 0.9], [-0.9, 0.9, 1]])
    with pytest.raises(FieldError, match="not all normal"):
        draw_inputs([rectangular("a", 0, 1), normal("b", 0, 1)], 1000, correlation=np.eye(2))


# ---- JCGM 101:2008, section 9 ----------------------------------------------------------------


def test_four_rectangular_inputs_of_jcgm_101_9_2_3(verify: Verify) -> None:
    inputs = [rectangular(f"X{k}", -sqrt(3), sqrt(3)) for k in range(4)]
    told = summarise(draw_inputs(inputs, MILLION, seed=1).sum(axis=1)[None])
    # exact from the distribution of a sum of uniform numbers: 3.8794; a normal one would have 3.9200
    assert_allclose(told.standard, 2.0, rtol=4 / sqrt(2 * MILLION) * 2)
    assert_allclose(told.symmetric[0], [-3.8794067413, 3.8794067413], atol=0.012)
    assert_allclose(told.shortest[0], [-3.8794067413, 3.8794067413], atol=0.05)
    linear = propagate(sensitivity(np.sum, np.zeros(4), [one.standard for one in inputs]).linear)
    assert_allclose(NORMAL_95 * linear.standard, 3.9199279690, rtol=1e-9)
    verify(
        what="Sum of four rectangular inputs: standard uncertainty and half width of 95 %",
        source="JCGM 101:2008, 9.2.3: 2.0 and 3.88",
        memory=True,
        expected=(2.0, 3.88),
        got=(told.standard[0], told.symmetric[0, 1]),
        tolerance=0.016,
        why="a million draws; printed with three digits",
        kind="uncertainty",
    )
    verify(
        what="Sum of four rectangular inputs: half width of 95 % of the linear law",
        source="JCGM 101:2008, 9.2.3: 3.92",
        memory=True,
        expected=3.92,
        got=NORMAL_95 * linear.standard[0],
        tolerance=5e-3,
        why="printed with three digits",
        kind="uncertainty",
    )


def mass_difference(x: np.ndarray) -> np.ndarray:
    mass, added, air, weight, reference = x
    return (mass + added) * (1 + (air - 1.2) * (1 / weight - 1 / reference)) - 1e5


MASS = [
    normal("m_R", 1e5, 0.05),
    normal("dm_R", 1.234, 0.02),
    rectangular("rho_a", 1.1, 1.3),
    rectangular("rho_W", 7000, 9000),
    rectangular("rho_R", 7950, 8050),
]


def test_mass_calibration_of_jcgm_101_9_3(verify: Verify) -> None:
    told = summarise(mass_difference(draw_inputs(MASS, MILLION, seed=2).T)[None])
    # table 5: 1.2340, 0.0754, [1.0834, 1.3825], in mg
    assert_allclose(told.mean, 1.2340, atol=4 * 0.0754 / sqrt(MILLION))
    assert_allclose(told.standard, 0.0754, atol=0.0003)
    assert_allclose(told.shortest[0], [1.0834, 1.3825], atol=0.004)
    verify(
        what="Calibration of a mass: mean, standard uncertainty, shortest interval of 95 %",
        source="JCGM 101:2008, 9.3, table 5",
        memory=True,
        expected=(1.2340, 0.0754, 1.0834, 1.3825),
        got=(told.mean[0], told.standard[0], *told.shortest[0]),
        unit="mg",
        tolerance=4e-3,
        why="a million draws",
        kind="uncertainty",
    )


def test_linear_propagation_fails_for_the_mass_calibration_as_published(verify: Verify) -> None:
    values, standard = [one.value for one in MASS], [one.standard for one in MASS]
    linear = propagate(sensitivity(mass_difference, values, standard).linear)
    assert_allclose(linear.standard, 0.0539, atol=5e-5)
    verify(
        what="Calibration of a mass: standard uncertainty of the linear law, which falls short",
        source="JCGM 101:2008, 9.3, table 5",
        memory=True,
        expected=0.0539,
        got=linear.standard[0],
        unit="mg",
        tolerance=5e-5,
        why="printed with three digits",
        kind="uncertainty",
    )


def test_comparison_loss_of_jcgm_101_9_4(verify: Verify) -> None:
    inputs = [normal("x1", 0.0, 0.005), normal("x2", 0.0, 0.005)]
    slope = sensitivity(lambda x: x @ x, [0.0, 0.0], [0.005, 0.005])
    assert propagate(slope.linear).standard == 0.0  # the law of propagation sees nothing here
    told = summarise((draw_inputs(inputs, MILLION, seed=3) ** 2).sum(axis=1)[None])
    # exact: exponential, with mean and deviation 50e-6; the shortest interval starts at zero
    assert_allclose(told.mean, 50e-6, rtol=4 / sqrt(MILLION))
    assert_allclose(told.standard, 50e-6, rtol=0.006)
    assert_allclose(told.shortest[0], [0.0, -50e-6 * log(0.05)], atol=0.7e-6)
    assert_allclose(told.symmetric[0], [-50e-6 * log(0.975), -50e-6 * log(0.025)], atol=0.8e-6)
    verify(
        what="Comparison loss of a power meter: mean, standard uncertainty and upper end of 95 %, times 1e6",
        source="JCGM 101:2008, 9.4: 50, 50 and 150",
        memory=True,
        expected=(50, 50, 150),
        got=(1e6 * told.mean[0], 1e6 * told.standard[0], 1e6 * told.shortest[0, 1]),
        tolerance=0.9,
        why="a million draws; exact 149.787",
        kind="uncertainty",
    )


# ---- what the formulas must give -------------------------------------------------------------


def test_momentum_of_an_uncertain_speed_is_exact_by_draws_and_nearly_so_by_the_linear_law() -> None:
    # F = rho A V²: u(F) / F = 2 u by the linear law, sqrt(4 u² + 2 u⁴) exactly
    for u in (0.01, 0.2):
        speed = draw_inputs([normal("V", 1.0, u)], MILLION, seed=5)[:, 0]
        told = summarise((speed**2)[None])
        assert_allclose(told.standard, sqrt(4 * u**2 + 2 * u**4), rtol=0.005)
        assert_allclose(told.mean, 1 + u**2, atol=8 * u / sqrt(MILLION))
        assert_allclose(sensitivity(lambda x: x**2, [1.0], [u]).linear[0], 2 * u, rtol=1e-12)
        assert_allclose(sensitivity(lambda x: x**2, [1.0], [u]).square[0], u**2, rtol=1e-12)


def test_the_seed_settles_the_draws() -> None:
    inputs = [normal("a", 3.0, 0.1), rectangular("b", -1.0, 1.0)]
    one, same, other = (draw_inputs(inputs, 1000, seed=seed) for seed in (7, 7, 8))
    assert (one == same).all()
    assert (one != other).any()
    assert np.abs(one[:, 1]).max() <= 1.0


def test_intervals_hold_what_they_say() -> None:
    rng = np.random.default_rng(0)
    sample = rng.gamma(2.0, size=100_000)
    told = summarise(sample.copy()[None])
    for low, high in (told.shortest[0], told.symmetric[0]):
        assert np.mean((sample >= low) & (sample <= high)) == pytest.approx(0.95, abs=2e-5)
    assert np.ptp(told.shortest[0]) < np.ptp(told.symmetric[0])
    below, above = np.mean(sample < told.symmetric[0, 0]), np.mean(sample > told.symmetric[0, 1])
    assert below == pytest.approx(above, abs=2e-5)


def test_a_constant_has_no_doubt() -> None:
    told = summarise(np.full((1, 1000), 0.1))
    assert told.mean[0] == 0.1
    assert told.standard[0] == 0.0
    assert (told.shortest == 0.1).all()


def test_few_draws_and_bad_inputs_are_refused() -> None:
    with pytest.raises(FieldError, match="10 draws"):
        draw_inputs([normal("a", 0, 1)], 10)
    with pytest.raises(FieldError, match=r"finite"):
        Input("a", 1.0, -0.1)
    with pytest.raises(FieldError, match="distribution"):
        Input("a", 1.0, 0.1, shape="triangular")  # type: ignore[arg-type]


def test_half_widths_become_standard_uncertainties() -> None:
    assert Input("a", 1.0, 1.959963984540054).standard == pytest.approx(1.0, rel=1e-15)
    assert Input("a", 1.0, 1.0, shape="rectangular").standard == pytest.approx(1 / sqrt(3), rel=1e-15)
