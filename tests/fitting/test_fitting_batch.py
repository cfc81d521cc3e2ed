"""fit_batch: recovery to the statistical limit, honest intervals, the same bits in any company, and its contract."""

from __future__ import annotations

import numpy as np
import pytest
from fitting_sweeps import around, bound, noisy, one_branch
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy import stats

from harness.circuits import resonator
from harness.circuits.resonator import Circuit
from harness.fitting import BatchFit, fit_batch
from harness.fitting.batch import CHUNK_POINTS

NAMES = ("fs_hz", "fp_hz", "r1_ohm", "q", "c0_f", "tan_delta", "c1_f", "l1_h", "keff")
FIELDS = [name for name in BatchFit.__slots__ if name != "status"]


def same(a: BatchFit, b: BatchFit, rows: slice | np.ndarray = slice(None)) -> bool:
    """Bit for bit, NaN equal to NaN; ``rows`` of a against all of b."""
    return np.array_equal(a.status[rows], b.status) and all(
        np.array_equal(getattr(a, name)[rows], getattr(b, name), equal_nan=True) for name in FIELDS
    )


@pytest.mark.parametrize("q", [20.0, 100.0, 1e3, 1e4, 1e5])
def test_clean_sweeps_give_back_the_circuit(q: float) -> None:
    """Without noise every quantity comes back to 1e-8, from Q 20 to 100 000."""
    circuit = one_branch(fs=1e6, q=q, r=12.0, r1=20.0)
    f = around(circuit, 401)
    # a comb over fs to fp cannot see a sharp resonance: add points across it, as a locating pass would
    across = 1e6 * (1 + np.linspace(-6, 6, 61) / (2 * q))
    f = np.sort(np.concatenate([f, across]))
    got = fit_batch(f, resonator.impedance(circuit, f))
    assert got.status[0] == "ok"
    want = bound(circuit, f, 1.0).truth
    for name in NAMES:
        assert getattr(got, name)[0] == pytest.approx(want[name], rel=1e-8), name
    assert got.relative_rms[0] < 1e-9


@pytest.mark.parametrize(
    ("q", "sigma", "n", "widths"),
    [
        (20.0, 0.01, 401, 3.0),
        (200.0, 0.001, 401, 8.0),
        (1e3, 0.01, 201, 40.0),
        (1e4, 0.0001, 801, 40.0),
        (1e5, 0.001, 301, 60.0),
    ],
)
def test_intervals_cover_and_errors_meet_the_bound(
    q: float, sigma: float, n: int, widths: float, rng: np.random.Generator
) -> None:
    """1 000 sweeps each: 95 % intervals (Student) cover 93–97 %, rms error ≤ 1.05 × Cramér–Rao, all converged."""
    circuit = one_branch(fs=1e6, q=q, r=12.0, r1=20.0)
    f = np.sort(
        np.concatenate([around(circuit, n // 2), 1e6 * (1 + np.linspace(-1, 1, n - n // 2) * widths / (2 * q))])
    )
    got = fit_batch(f, noisy(resonator.impedance(circuit, f), sigma, rng, 1000))
    assert (got.status == "ok").all()
    limit = bound(circuit, f, sigma)
    degrees = 2 * n - 5
    # u is the t-distributed quantity's standard deviation, which holds a factor √(ν/(ν − 2)) already
    k = stats.t.ppf(0.975, degrees) * np.sqrt((degrees - 2) / degrees)
    for name in NAMES:
        error = getattr(got, name) - limit.truth[name]
        covered = np.mean(np.abs(error) <= k * getattr(got, "u_" + name))
        # ±2.8 standard deviations of a share of 1 000 on top of 93–97 %
        assert 0.93 - 0.008 <= covered <= 0.97 + 0.008, name
        # rms of 1 000 draws has a standard deviation of 2.2 %
        assert np.sqrt(np.mean(error**2)) <= (1.05 + 0.045) * limit.least[name], name


def test_few_points_widen_by_student(rng: np.random.Generator) -> None:
    """With 10 points, 15 degrees of freedom, Student intervals still cover 95 %."""
    circuit = one_branch(fs=1e6, q=50.0, r=12.0, r1=20.0)
    f = np.concatenate([1e6 * (1 + np.array([-2.0, -1, -0.4, 0, 0.4, 1, 2]) / 100), [1.03e6, 1.042e6, 1.06e6]])
    got = fit_batch(f, noisy(resonator.impedance(circuit, f), 0.002, rng, 2000))
    assert (got.status == "ok").all()
    degrees = 15
    k = stats.t.ppf(0.975, degrees) * np.sqrt((degrees - 2) / degrees)
    truth = bound(circuit, f, 0.002).truth
    for name in ("fs_hz", "r1_ohm", "q", "c0_f", "keff"):
        covered = np.mean(np.abs(getattr(got, name) - truth[name]) <= k * getattr(got, "u_" + name))
        assert covered == pytest.approx(0.95, abs=0.02), name


def mixed(rng: np.random.Generator, n: int, rows: int) -> tuple[np.ndarray, np.ndarray]:
    """Sweeps of different parts at different frequencies, some of them no parts at all, some with gaps."""
    f, z = np.empty((rows, n)), np.empty((rows, n), dtype=complex)
    for k in range(rows):
        circuit = one_branch(fs=1e6 * rng.uniform(0.9, 1.1), q=10 ** rng.uniform(1.3, 3), r=rng.uniform(3, 30))
        f[k] = around(circuit, n, widths=rng.uniform(3, 20))
        z[k] = noisy(resonator.impedance(circuit, f[k]), 10 ** rng.uniform(-4, -2), rng)
        if k % 7 == 3:
            z[k] = 50 + 1j * f[k] * 1e-4
        if k % 5 == 2:
            z[k, rng.integers(0, n, 3)] = np.nan
        if k % 6 == 4:
            z[k, n // 3] *= 20
    return f, z


@pytest.mark.parametrize("n", [11, 64, 101, 401])
@pytest.mark.parametrize("options", [{}, {"motional_phase": True}, {"series_resistance": True}])
def test_same_bits_alone_in_any_batch_and_in_any_order(
    n: int, options: dict[str, bool], rng: np.random.Generator
) -> None:
    """A sweep's numbers are the same bits alone, in a batch, in halves, and in another order."""
    f, z = mixed(rng, n, 23)
    together = fit_batch(f, z, **options)
    order = rng.permutation(23)
    assert same(together, fit_batch(f[order], z[order], **options), order)
    assert same(together, fit_batch(f[5:16], z[5:16], **options), slice(5, 16))
    for k in (0, 3, 4, 22):
        assert same(together, fit_batch(f[k], z[k], **options), slice(k, k + 1))


def test_chunk_borders_change_no_bit(rng: np.random.Generator) -> None:
    """A batch over several chunks gives each sweep the bits it has alone."""
    n = 401
    rows = 2 * (CHUNK_POINTS // n) + 3
    circuit = one_branch()
    f = around(circuit, n)
    z = noisy(resonator.impedance(circuit, f), 0.001, rng, rows)
    together = fit_batch(f, z)
    border = CHUNK_POINTS // n
    for k in (0, border - 1, border, 2 * border, rows - 1):
        assert same(together, fit_batch(f, z[k]), slice(k, k + 1))


def test_order_of_points_changes_no_bit(rng: np.random.Generator) -> None:
    """Frequencies may come in any order."""
    circuit = one_branch()
    f = around(circuit, 201)
    z = noisy(resonator.impedance(circuit, f), 0.002, rng, 4)
    order = rng.permutation(201)
    assert same(fit_batch(f, z), fit_batch(f[order], z[:, order]))


def test_dropped_points_are_as_if_never_measured(rng: np.random.Generator) -> None:
    """NaN, infinity, zero, and a frequency that is no number are left out; the rest decides."""
    circuit = one_branch()
    f = around(circuit, 201)
    z = noisy(resonator.impedance(circuit, f), 0.002, rng)
    clean = fit_batch(np.delete(f, [3, 50, 120, 150]), np.delete(z, [3, 50, 120, 150]))
    f_bad, z_bad = f.copy(), z.copy()
    z_bad[3], z_bad[50], z_bad[120], f_bad[150] = np.nan, complex(np.inf, 1), 0, np.nan
    dirty = fit_batch(f_bad, z_bad)
    assert dirty.status[0] == "ok"
    for name in FIELDS:
        assert getattr(dirty, name)[0] == pytest.approx(getattr(clean, name)[0], rel=1e-7), name


def test_repeated_frequencies_count_as_more_readings(rng: np.random.Generator) -> None:
    """Every point measured four times halves the uncertainties."""
    circuit = one_branch()
    f = around(circuit, 201)
    z = resonator.impedance(circuit, f)
    once = fit_batch(f, noisy(z, 0.002, rng, 50))
    four = fit_batch(np.repeat(f, 4), noisy(np.repeat(z, 4), 0.002, rng, 50))
    assert (four.status == "ok").all()
    assert np.median(four.u_fs_hz) == pytest.approx(np.median(once.u_fs_hz) / 2, rel=0.1)


@given(st.floats(-5, 5), st.floats(-4, 4))
@settings(max_examples=25, deadline=None)
def test_units_do_not_matter(decades_z: float, decades_f: float) -> None:
    """Scaling Z by a and f by b scales fs by b, R1 by a, C0 by 1/(ab), L1 by a/b, and leaves Q, tan δ and keff."""
    a, b = 10**decades_z, 10**decades_f
    rng = np.random.default_rng(4)
    circuit = one_branch()
    f = around(circuit, 101)
    z = noisy(resonator.impedance(circuit, f), 0.002, rng)
    one, other = fit_batch(f, z), fit_batch(b * f, a * z)
    assert other.status[0] == "ok"
    factors = {"fs_hz": b, "fp_hz": b, "r1_ohm": a, "c0_f": 1 / (a * b), "c1_f": 1 / (a * b), "l1_h": a / b}
    for name in NAMES:
        factor = factors.get(name, 1.0)
        assert getattr(other, name)[0] == pytest.approx(factor * getattr(one, name)[0], rel=1e-7), name
        assert getattr(other, "u_" + name)[0] == pytest.approx(factor * getattr(one, "u_" + name)[0], rel=1e-5), name


def test_sigma_may_be_a_number_a_row_or_every_point(rng: np.random.Generator) -> None:
    """sigma_ohm broadcasts from (), (N,), (B, 1) and (B, N) to the same bits."""
    circuit = one_branch()
    f = around(circuit, 101)
    z = resonator.impedance(circuit, f) + 0.05 * (rng.standard_normal((3, 101)) + 1j * rng.standard_normal((3, 101)))
    scalar = fit_batch(f, z, sigma_ohm=0.05)
    for sigma in (np.full(101, 0.05), np.full((3, 1), 0.05), np.full((3, 101), 0.05)):
        assert same(scalar, fit_batch(f, z, sigma_ohm=sigma))
    assert (scalar.status == "ok").all()


def test_given_sigma_is_a_floor_of_the_uncertainty(rng: np.random.Generator) -> None:
    """A sweep quieter than the instrument's own noise is not believed to be more certain than that."""
    circuit = one_branch()
    f = around(circuit, 201)
    z = resonator.impedance(circuit, f)
    quiet = noisy(z, 1e-5, rng)
    told = fit_batch(f, quiet, sigma_ohm=1e-3 * np.abs(z))
    honest = fit_batch(f, noisy(z, 1e-3, rng, 40), sigma_ohm=1e-3 * np.abs(z))
    assert told.u_fs_hz[0] == pytest.approx(np.median(honest.u_fs_hz), rel=0.1)
    # one that is noisier than told is scaled up
    loud = fit_batch(f, noisy(z, 1e-2, rng), sigma_ohm=1e-3 * np.abs(z))
    assert loud.u_fs_hz[0] > 7 * told.u_fs_hz[0]


def test_constant_noise_covers_when_sigma_is_given(rng: np.random.Generator) -> None:
    """Noise of the same ohms everywhere, told as such: intervals cover."""
    circuit = one_branch(q=100.0)
    f = around(circuit, 201)
    z = resonator.impedance(circuit, f)
    draw = rng.standard_normal((600, 201)) + 1j * rng.standard_normal((600, 201))
    got = fit_batch(f, z + 0.1 * draw, sigma_ohm=0.1)
    assert (got.status == "ok").all()
    truth = bound(circuit, f, 1.0).truth
    for name in ("fs_hz", "r1_ohm", "q", "c0_f"):
        covered = np.mean(np.abs(getattr(got, name) - truth[name]) <= 1.96 * getattr(got, "u_" + name))
        assert covered == pytest.approx(0.95, abs=0.03), name


@pytest.mark.parametrize(
    ("f", "z", "sigma"),
    [
        (np.ones(5), np.ones(6), None),
        (np.ones((2, 6)), np.ones((3, 6)), None),
        (np.ones((2, 6)), np.ones(6), None),
        (np.ones(6), np.ones((2, 3, 6)), None),
        (np.array(1.0), np.ones(6), None),
        (np.ones(6), np.ones((2, 6)), np.ones(5)),
        (np.ones(6), np.ones((2, 6)), np.ones((3, 6))),
    ],
)
def test_only_shapes_that_do_not_match_raise(f: np.ndarray, z: np.ndarray, sigma: np.ndarray | None) -> None:
    """Shapes that do not fit together are a ValueError that names them."""
    with pytest.raises(ValueError, match="match"):
        fit_batch(f, z, sigma_ohm=sigma)


def test_nothing_in_nothing_out() -> None:
    """No sweeps give empty arrays; sweeps without points, or too few, are bad data."""
    none = fit_batch(np.linspace(1, 2, 5), np.empty((0, 5)))
    assert none.status.shape == (0,)
    assert none.fs_hz.shape == none.u_keff.shape == (0,)
    empty = fit_batch(np.empty(0), np.empty((3, 0)))
    assert empty.status.tolist() == ["bad-data"] * 3
    few = fit_batch(np.linspace(1e6, 2e6, 5), np.ones((2, 5)))
    assert few.status.tolist() == ["bad-data"] * 2
    assert np.isnan(few.fs_hz).all()


def test_one_sweep_and_a_list_are_welcome() -> None:
    """(N,) counts as one sweep; lists do."""
    circuit = one_branch()
    f = around(circuit, 101)
    z = resonator.impedance(circuit, f)
    assert same(fit_batch(f, z), fit_batch(f.tolist(), [z.tolist()]))


def test_series_resistance_is_told_from_the_motional_one(rng: np.random.Generator) -> None:
    """With Rs freed, R1 is the branch's own again, which it is not without."""
    circuit = one_branch(r1=12.0, q=80.0, r=2.0, loss=0.01, rs=6.0)
    f = around(circuit, 401, widths=12)
    z = noisy(resonator.impedance(circuit, f), 0.002, rng)
    told = fit_batch(f, z, series_resistance=True)
    assert told.status[0] == "ok"
    assert abs(told.r1_ohm[0] - 12.0) < 3 * told.u_r1_ohm[0]
    assert fit_batch(f, z).r1_ohm[0] > 15


def test_motional_phase_is_told(rng: np.random.Generator) -> None:
    """A branch turned by θ comes back unbiased with θ freed, and biased without."""
    straight = one_branch(q=150.0)
    theta = np.array([-0.06])
    circuit = Circuit(straight.c_f, straight.tan_delta, straight.f_hz, straight.q, straight.g_s, theta, straight.rs_ohm)
    f = around(circuit, 401)
    z = noisy(resonator.impedance(circuit, f), 0.001, rng)
    told, untold = fit_batch(f, z, motional_phase=True), fit_batch(f, z)
    assert abs(told.fs_hz[0] - 1.65e6) < 3 * told.u_fs_hz[0]
    assert abs(told.q[0] - 150) < 3 * told.u_q[0]
    assert untold.relative_rms[0] > 2 * told.relative_rms[0]


def test_search_window_chooses_between_two_resonances(rng: np.random.Generator) -> None:
    """With two resonances in the sweep, the window says which is meant; a window without one finds none."""
    f = np.linspace(0.9e6, 1.3e6, 801)
    y = 1 / resonator.impedance(one_branch(fs=1e6, q=300, r=40, r1=10), f)
    branch = resonator.branch_admittances(one_branch(fs=1.2e6, q=300, r1=14), f)[0]
    z = noisy(1 / (y + branch), 0.0005, rng)
    low, high = (fit_batch(f, z, search_hz=window) for window in ((0.95e6, 1.05e6), (1.15e6, 1.25e6)))
    assert low.status[0] == high.status[0] == "ok"
    assert low.fs_hz[0] == pytest.approx(1e6, rel=2e-3)
    assert high.fs_hz[0] == pytest.approx(1.2e6, rel=2e-3)
    assert fit_batch(f, z, search_hz=(1.26e6, 1.3e6)).status[0] != "ok"


def test_capacitance_out_of_reach_is_not_told(rng: np.random.Generator) -> None:
    """A sweep of a few bandwidths of a sharp crystal tells fs, Q and R1, and leaves C0, fp, tan δ and keff open."""
    circuit = one_branch(fs=1e7, q=1e5, r=3.0, r1=20.0)
    f = 1e7 * (1 + np.linspace(-8, 8, 201) / 2e5)
    got = fit_batch(f, noisy(resonator.impedance(circuit, f), 0.01, rng, 50))
    assert (got.status == "ok").all()
    assert np.abs(got.fs_hz / 1e7 - 1).max() < 1e-6
    untold = np.isnan(got.c0_f)
    assert untold.mean() > 0.9
    for name in ("fp_hz", "tan_delta", "keff", "u_c0_f", "u_fp_hz"):
        assert np.isnan(getattr(got, name)[untold]).all()


@pytest.mark.parametrize("share", [1, 3])
def test_contact_bounce_leaves_the_answer_alone(share: int, rng: np.random.Generator) -> None:
    """Single wild points, up to three in a sweep, move hardly any result by more than 4 u of the clean sweep."""
    circuit = one_branch()
    f = around(circuit, 201)
    z = noisy(resonator.impedance(circuit, f), 0.0015, rng, 100)
    clean, bounced = fit_batch(f, z), z.copy()
    for row in range(100):
        at = rng.choice(np.arange(5, 196, 8), share, replace=False)
        bounced[row, at] += 10 ** rng.uniform(1.5, 4.5, share)
    got = fit_batch(f, bounced)
    assert (got.status == "ok").mean() >= 0.99
    ok = got.status == "ok"
    for name in ("fs_hz", "r1_ohm", "q", "c0_f", "keff"):
        moved = np.abs(getattr(got, name) - getattr(clean, name)) / getattr(clean, "u_" + name)
        assert np.quantile(moved[ok], 0.99) < 4, name
