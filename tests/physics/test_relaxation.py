"""Stiffness tables, Kramers and Kronig (CHECKS P6), and causal stand-ins for a loss factor."""

import numpy as np
import pytest
from scipy.integrate import quad
from scipy.interpolate import PchipInterpolator

from detune.physics.causal import (
    RelaxationChain,
    chain_for_loss_factor,
    chain_stiffness,
    fit_relaxation_chain,
    largest_difference,
    receptance_difference,
    simulate_with_chains,
    viscous_equivalent,
)
from detune.physics.damping import relaxation_stiffness
from detune.physics.relaxation import (
    kramers_kronig_violation,
    stiffness_table,
    storage_deficit,
    table_stiffness,
)
from detune.physics.simulation import simulate
from detune.physics.tables import OutsideTable, hermite, monotone_slopes, require_rising

TWO_PI = 2.0 * np.pi


def zener(omega: np.ndarray) -> np.ndarray:
    return relaxation_stiffness(1.0, 2.0, 3.0, omega)


def test_p6_kramers_kronig_of_a_relaxation_mount() -> None:
    # P6: k1 = 1, k2 = 3, c = 2, w0 = .7: the integral 2.463504 against K_inf - K'(w0) = 2.463502 .. 2.463504.
    found = storage_deficit(lambda w: zener(w).imag, 0.7, 1e-7, 1e8)
    assert found == pytest.approx(2.463504, abs=1e-6)
    assert found == pytest.approx(4.0 - zener(np.array(0.7)).real, abs=1e-7)
    # Sum rule: K_inf - K_0 = (2/pi) integral of K''/w dw = 3.
    total, _ = quad(lambda w: float(zener(np.array(w)).imag) / w, 0.0, np.inf)
    assert 2.0 / np.pi * total == pytest.approx(3.0, rel=1e-8)


def test_p6_trap_a_constant_loss_factor_must_fail() -> None:
    # P6: its deficit grows without bound, by (2/pi) eta ln 10 a decade: no K_inf exists.
    ends = [storage_deficit(lambda w: np.full_like(w, 0.1), 0.7, 1e-6, high) for high in (1e3, 1e4, 1e5)]
    assert np.diff(ends) == pytest.approx(0.2 / np.pi * np.log(10.0), rel=1e-2)
    omega = np.geomspace(1.0, 100.0, 40)
    assert kramers_kronig_violation(omega, np.full(40, 1.0 + 0.1j)) > 0.3
    # Mounts that exist pass: relaxation, viscous, and a power law of constant loss factor whose storage rises.
    assert kramers_kronig_violation(omega, zener(omega / 20.0)) < 0.01
    assert kramers_kronig_violation(omega, 1.0 + 0.002j * omega) < 1e-9
    assert kramers_kronig_violation(omega, (1j * omega) ** 0.0635) < 1e-3
    # Energy out of nothing: a negative loss, and a storage stiffness that falls.
    assert kramers_kronig_violation(omega, 1.0 - 0.1j * np.ones(40)) > 0.9
    assert kramers_kronig_violation(omega, (2.0 - 0.2 * np.log10(omega)) + 0.1j) > 0.5
    assert kramers_kronig_violation(omega, np.full(40, 5.0 + 0j)) == 0.0


TABLE = stiffness_table(
    [1.0, 10.0, 100.0, 1000.0],
    [[1.0e5, 1.2e5, 1.6e5, 2.4e5], [8.0e4, 9.0e4, 1.1e5, 1.5e5]],
    [[0.1, 0.2, 0.3, 0.3], [0.05, 0.08, 0.1, 0.15]],
    [-20.0, 20.0],
)


def test_table_goes_through_its_points_and_between_them_like_scipy() -> None:
    found = table_stiffness(TABLE, TWO_PI * np.array([1.0, 10.0, 100.0, 1000.0]), 20.0)
    assert found == pytest.approx([8e4 + 4e3j, 9e4 + 7.2e3j, 1.1e5 + 1.1e4j, 1.5e5 + 2.25e4j])
    # Independent: scipy's PCHIP on log-log axes; halfway in temperature the geometric mean of the two rows.
    f = np.geomspace(1.0, 1000.0, 57)
    rows = [[1.0e5, 1.2e5, 1.6e5, 2.4e5], [8.0e4, 9.0e4, 1.1e5, 1.5e5]]
    logs = [PchipInterpolator(np.log([1, 10, 100, 1000]), np.log(row))(np.log(f)) for row in rows]
    assert table_stiffness(TABLE, TWO_PI * f, 0.0).real == pytest.approx(np.exp(0.5 * (logs[0] + logs[1])))


def test_trap_nothing_is_extrapolated() -> None:
    with pytest.raises(
        OutsideTable, match=r"frequency 1200 Hz lies outside the table, which covers 1 to 1000 Hz"
    ):
        table_stiffness(TABLE, TWO_PI * np.array([5.0, 1200.0]), 0.0)
    with pytest.raises(OutsideTable, match=r"temperature -25 deg C"):
        table_stiffness(TABLE, TWO_PI * 5.0, -25.0)
    with pytest.raises(OutsideTable, match="temperature nan"):
        table_stiffness(TABLE, TWO_PI * 5.0, float("nan"))
    one = stiffness_table([1.0, 10.0], [1e5, 1e5], [0.1, 0.1], 20.0)
    assert table_stiffness(one, TWO_PI * 3.0, 20.0) == pytest.approx(1e5 + 1e4j)
    with pytest.raises(OutsideTable, match="temperature 21"):
        table_stiffness(one, TWO_PI * 3.0, 21.0)


@pytest.mark.parametrize(
    ("frequency", "storage", "loss", "words"),
    [
        ([1, 1], [1, 1], [1, 1], "row 2"),
        ([0, 1], [1, 1], [1, 1], "row 1 is not above zero"),
        ([1, 2], [1, -1], [1, 1], "storage stiffness at 20 deg C and 2 Hz"),
        ([1, 2], [1, 1], [0, 1], "loss factor at 20 deg C and 1 Hz"),
        ([1, 2], [1, 1, 1], [1, 1], "one value is needed"),
    ],
)
def test_bad_tables_are_refused_by_place(
    frequency: list[float], storage: list[float], loss: list[float], words: str
) -> None:
    with pytest.raises(ValueError, match=words):
        stiffness_table(frequency, storage, loss, 20.0)


def test_monotone_cubic_against_scipy_and_refusals() -> None:
    rng = np.random.default_rng(9)
    for _ in range(20):
        x = np.cumsum(rng.uniform(0.05, 2.0, 8))
        y = np.cumsum(rng.normal(size=8)) if rng.random() < 0.5 else np.cumsum(rng.uniform(0.0, 1.0, 8))
        query = rng.uniform(x[0], x[-1], 50)
        value, slope = hermite(x, y, monotone_slopes(x, y), query)
        own = PchipInterpolator(x, y)
        assert value == pytest.approx(own(query), abs=1e-12)
        assert slope == pytest.approx(own(query, 1), abs=1e-11)
    for column, words in (([1.0], "two rows"), ([1.0, np.inf], "row 2"), ([2.0, 1.0], "row 2")):
        with pytest.raises(ValueError, match=words):
            require_rising("column", np.array(column))


def test_chain_gives_a_near_constant_loss_factor_and_says_what_it_costs() -> None:
    # eta = 0.1 over two decades about 10 Hz; the storage stiffness must rise with the slope 2/pi atan(eta) = 0.0635.
    chain = chain_for_loss_factor(1e5, 0.1, TWO_PI * 10.0, TWO_PI * 1.0, TWO_PI * 100.0)
    omega = TWO_PI * np.geomspace(1.0, 100.0, 77)
    stiffness = chain_stiffness(chain, omega)
    assert stiffness.imag / stiffness.real == pytest.approx(0.1, rel=1e-3)
    assert chain_stiffness(chain, TWO_PI * 10.0).real == pytest.approx(1e5, rel=1e-4)
    assert stiffness.real[-1] / stiffness.real[0] == pytest.approx(100.0**0.0634511, rel=1e-3)
    # The difference to the constant k (1 + j eta): 10^0.0635 - 1 at the ends of the band.
    assert largest_difference(chain, omega, 1e5 * (1 + 0.1j)) == pytest.approx(
        10.0**0.0634511 - 1.0, rel=5e-3
    )
    assert min(chain.static, chain.viscous, *chain.stiffness) >= 0.0
    with pytest.raises(ValueError, match="low <= reference <= high"):
        chain_for_loss_factor(1e5, 0.1, 1.0, 2.0, 3.0)


def test_a_measured_chain_is_found_again() -> None:
    omega = np.geomspace(0.05, 50.0, 60)
    chain = fit_relaxation_chain(omega, zener(omega))
    assert largest_difference(chain, omega, zener(omega)) < 5e-3
    with pytest.raises(ValueError, match="two or more positive"):
        fit_relaxation_chain([1.0], [1.0 + 0j])


MASS = np.diag([3.0, 5.0, 2.0])
STIFFNESS = np.array([[3.0, -1.0, 0.0], [-1.0, 2.5, -1.5], [0.0, -1.5, 2.0]]) * 1e4


def test_trap_loss_factor_in_time_one_viscous_coefficient_overdamps_higher_modes() -> None:
    # Each mode gets eta/2; one c = eta K/w1 would give mode r the ratio (eta/2) w_r/w_1, 2.9 times too much here.
    found = viscous_equivalent(MASS, STIFFNESS, 0.1 * STIFFNESS)

    def ratios(damping: np.ndarray) -> np.ndarray:
        inverse = np.linalg.inv(MASS)
        poles = np.linalg.eigvals(
            np.block([[np.zeros((3, 3)), np.eye(3)], [-inverse @ STIFFNESS, -inverse @ damping]])
        )
        poles = poles[poles.imag > 0.0]
        return np.sort(-poles.real / np.abs(poles))

    assert ratios(found.damping) == pytest.approx([0.05] * 3, abs=1e-10)
    assert found.loss_factor == pytest.approx([0.1] * 3)
    single = 0.1 * STIFFNESS / (TWO_PI * found.frequency[0])
    growth = found.frequency / found.frequency[0]
    assert growth[-1] > 2.9
    assert ratios(single) == pytest.approx(0.05 * growth, rel=1e-9)


def test_viscous_stand_in_is_near_at_resonance_and_its_difference_is_reported() -> None:
    found = viscous_equivalent(MASS, STIFFNESS, 0.1 * STIFFNESS)
    omega = TWO_PI * found.frequency
    stand_in = STIFFNESS + 1j * omega[:, None, None] * found.damping
    at_modes = receptance_difference(MASS, omega, STIFFNESS * (1 + 0.1j), stand_in)
    # At each resonance both have the same damping; the rest comes from the other modes.
    assert np.all(at_modes < 0.02)
    # Far below all modes the loss factor still damps and the dashpots do not: |1 - 1/(1 + 0.1 j)| = 0.0995.
    low = receptance_difference(MASS, [0.01], STIFFNESS * (1 + 0.1j), STIFFNESS)
    assert low == pytest.approx(0.0995, abs=1e-3)


def test_a_free_mode_gets_no_damping() -> None:
    free = np.array([[1.0, -1.0], [-1.0, 1.0]]) * 1e4
    found = viscous_equivalent(np.eye(2), free, 0.2 * free)
    assert found.loss_factor == pytest.approx([0.0, 0.2], abs=1e-9)
    assert found.damping @ np.ones(2) == pytest.approx([0.0, 0.0], abs=1e-9)


def test_chains_in_time_against_the_frequency_domain() -> None:
    # Steady state of two freedoms, one hanging on a fitted chain, the other on a spring and damper.
    chain = chain_for_loss_factor(4e4, 0.2, 60.0, 6.0, 600.0)
    mass, damping = np.diag([10.0, 4.0]), np.diag([0.0, 15.0])
    stiffness = np.array([[1e4, -1e4], [-1e4, 1.5e4]])
    step, frequency, count = 1e-3, 8.0, 125
    load = np.cos(TWO_PI * frequency * np.arange(100 * count) * step)
    found = simulate_with_chains(
        mass, damping, stiffness, [[1.0, 0.0]], [chain], load, step, shapes=[[5.0], [-2.0]]
    )
    w = TWO_PI * frequency
    matrix = stiffness + np.diag([complex(chain_stiffness(chain, w)), 0.0]) + 1j * w * damping - w**2 * mass
    q = np.linalg.solve(matrix, [5.0, -2.0])
    wanted = (q[None] * np.exp(1j * w * np.arange(count) * step)[:, None]).real
    assert np.max(np.abs(found.displacement[-count:] - wanted)) < 5e-4 * np.abs(wanted).max()
    assert np.max(np.abs(found.acceleration[-count:] + w**2 * wanted)) < 2e-3 * w**2 * np.abs(wanted).max()


def test_a_chain_of_a_mere_spring_and_dashpot_is_viscous_motion() -> None:
    chain = RelaxationChain(300.0, 4.0, np.zeros(0), np.zeros(0))
    load = np.random.default_rng(1).normal(size=200)
    found = simulate_with_chains([[2.0]], [[1.0]], [[100.0]], [[1.0]], [chain], load, 0.01)
    plain = simulate([[2.0]], [[5.0]], [[400.0]], load, 0.01)
    assert found.displacement == pytest.approx(plain.displacement, abs=1e-13)
    assert found.acceleration == pytest.approx(plain.acceleration, abs=1e-11)
