"""The fixture: off and on are mirrors, its sensitivities are derivatives, and open/short find it again."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from harness.correction import correct, correction_sensitivity, embed, from_open_short
from harness.errors import StationError
from harness.records import Correction

F_HZ = np.linspace(1.5e6, 1.8e6, 61)
FIXTURE = Correction("nest 1", rs_ohm=0.35, ls_h=85e-9, cp_f=4.2e-12, u_rs_ohm=0.01, u_ls_h=2e-9, u_cp_f=0.1e-12)


def _part(f_hz: np.ndarray) -> np.ndarray:
    """A made-up mist disc: C0 1.2 nF, fs 1.65 MHz, R1 5 Ω, Q 300."""
    y = 2j * np.pi * f_hz * 1.2e-9 * (1 - 0.004j) + 0.2 / (1 + 300j * (f_hz / 1.65e6 - 1.65e6 / f_hz))
    return 1 / y


@given(
    st.floats(-2, 20),
    st.floats(-1e-7, 1e-6),
    st.floats(0, 1e-10),
    st.floats(1e4, 1e7),
    st.floats(0.1, 1e5),
    st.floats(-1e5, 1e5),
)
def test_off_and_on_are_mirrors(rs: float, ls: float, cp: float, f_hz: float, r: float, x: float) -> None:
    """Embedding a part and correcting again gives the part, and the other way round."""
    fixture, z = Correction("any", rs, ls, cp), complex(r, x)
    turn = abs(z) * 2 * np.pi * f_hz * cp  # how far the stray outweighs the part: digits that cancel
    arm = abs(rs + 2j * np.pi * f_hz * ls)
    there = embed(f_hz, z, fixture)
    slack = 1e-13 * (1 + turn) * (1 + (arm + abs(there)) / max(abs(there - (rs + 2j * np.pi * f_hz * ls)), 1e-300))
    assert abs(correct(f_hz, there, fixture) - z) <= slack * abs(z) * (1 + turn)


def test_no_fixture_changes_no_bit() -> None:
    """The default correction returns the same numbers exactly, infinities too."""
    z = np.array([1.1 - 2.2j, -0.0 + 0.0j, complex(np.inf, 0)])
    assert correct(np.full(3, 1e6), z, Correction()).tobytes() == z.tobytes()
    assert embed(np.full(3, 1e6), z, Correction()).tobytes() == z.tobytes()


def test_embed_is_the_circuit() -> None:
    """Z = Rs + jωLs + 1/(1/Zp + jωCp), written out, is what the terminals show."""
    omega, part = 2 * np.pi * F_HZ, _part(F_HZ)
    expected = 0.35 + 1j * omega * 85e-9 + 1 / (1 / part + 1j * omega * 4.2e-12)
    np.testing.assert_allclose(embed(F_HZ, part, FIXTURE), expected, rtol=1e-13)


@pytest.mark.parametrize(("name", "step"), [("rs_ohm", 1e-5), ("ls_h", 1e-12), ("cp_f", 1e-16)])
def test_sensitivities_are_derivatives(name: str, step: float) -> None:
    """Each sensitivity agrees with the central difference of ln Z_part by that lumped value."""
    z = embed(F_HZ, _part(F_HZ), FIXTURE)
    sensitivity = correction_sensitivity(F_HZ, z, FIXTURE)

    def log_part(shift: float) -> np.ndarray:
        values = {key: getattr(FIXTURE, key) for key in ("rs_ohm", "ls_h", "cp_f")}
        return np.log(correct(F_HZ, z, Correction("nest 1", **{**values, name: values[name] + shift})))

    difference = (log_part(step) - log_part(-step)) / (2 * step)
    analytic = {"rs_ohm": sensitivity.rs, "ls_h": sensitivity.ls, "cp_f": sensitivity.cp}[name]
    np.testing.assert_allclose(analytic, difference, rtol=1e-5)


def test_lead_inductance_shifts_series_resonance_as_it_must() -> None:
    """A lead Ls lowers the zero of the terminals' reactance by Δfs/fs = −Ls/(2·L1), to first order, C0 aside."""
    l1, c1, ls = 9e-3, 1 / (9e-3 * (2 * np.pi * 113e3) ** 2), 9e-6
    f = np.linspace(112.5e3, 113.5e3, 20001)
    z = 20 + 1j * (2 * np.pi * f * l1 - 1 / (2 * np.pi * f * c1))
    lead = Correction("lead", ls_h=ls)
    zero = np.interp(0.0, embed(f, z, lead).imag, f)
    assert (zero - 113e3) / 113e3 == pytest.approx(-ls / (2 * l1), rel=1e-3)
    assert np.interp(0.0, correct(f, embed(f, z, lead), lead).imag, f) == pytest.approx(113e3, rel=1e-9)


def _open_short(fixture: Correction, f_hz: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    omega = 2 * np.pi * f_hz
    shorted = fixture.rs_ohm + 1j * omega * fixture.ls_h
    return shorted + 1 / (1j * omega * fixture.cp_f), shorted


def test_open_and_short_find_the_fixture() -> None:
    """A clean open and short give the lumped values back, with no uncertainty of their own."""
    found = from_open_short(F_HZ, *_open_short(FIXTURE, F_HZ), fixture="nest 1")
    assert found.fixture == "nest 1"
    assert [found.rs_ohm, found.ls_h, found.cp_f] == pytest.approx([0.35, 85e-9, 4.2e-12], rel=1e-9)
    assert found.u_rs_ohm < 1e-12
    assert found.u_ls_h < 1e-18
    assert found.u_cp_f < 1e-20


def test_open_and_short_with_noise_cover_the_truth(rng: np.random.Generator) -> None:
    """With noisy readings every lumped value lies within its uncertainty of the truth."""
    opened, shorted = _open_short(FIXTURE, F_HZ)
    noise = 0.003 * (rng.standard_normal((2, F_HZ.size)) + 1j * rng.standard_normal((2, F_HZ.size)))
    found = from_open_short(F_HZ, opened * (1 + noise[0]), shorted * (1 + noise[1]))
    assert 0 < abs(found.rs_ohm - 0.35) < found.u_rs_ohm
    assert 0 < abs(found.ls_h - 85e-9) < found.u_ls_h
    assert 0 < abs(found.cp_f - 4.2e-12) < found.u_cp_f


def test_a_drifting_fixture_is_not_averaged_away() -> None:
    """Contact resistance that rises with frequency shows as its spread, however many points there are."""
    for points in (11, 1001):
        f = np.linspace(1.5e6, 1.8e6, points)
        opened, shorted = _open_short(FIXTURE, f)
        rise = np.linspace(0, 0.2, points)
        found = from_open_short(f, opened + rise, shorted + rise)
        assert found.u_rs_ohm == pytest.approx(0.2 / np.sqrt(12), rel=0.15)


CANNOT_BE = [
    ("exchanged", lambda o, s: (s, o)),
    ("only 1 times", lambda o, s: (s, s)),
    ("not numbers", lambda o, s: (o * np.nan, s)),
    ("negative", lambda o, s: (o - 2 * s.real, s - 2 * s.real)),
    ("stray capacitance comes out negative", lambda o, s: (2 * s - o, s)),
    ("leaks", lambda o, s: (1 / (1 / (o - s) + 2e-5) + s, s)),
]


@pytest.mark.parametrize(("says", "spoil"), CANNOT_BE, ids=[row[0] for row in CANNOT_BE])
def test_what_was_no_open_and_short_is_refused(says: str, spoil: object) -> None:
    """Exchanged, equal, unmeasured, negative or leaking: one sentence that names the fixture and what to do."""
    opened, shorted = spoil(*_open_short(FIXTURE, F_HZ))  # type: ignore[operator]
    with pytest.raises(StationError, match=says) as caught:
        from_open_short(F_HZ, opened, shorted, fixture="nest 1")
    assert str(caught.value).startswith("nest 1: ")
    assert caught.value.remedy


def test_too_few_frequencies_are_refused() -> None:
    """Two frequencies have no spread worth the name."""
    with pytest.raises(StationError, match="2 frequencies"):
        from_open_short(F_HZ[:2], *_open_short(FIXTURE, F_HZ[:2]))


def test_shapes_must_agree() -> None:
    """Open and short at different frequencies are a caller's mistake."""
    with pytest.raises(ValueError, match="same frequencies"):
        from_open_short(F_HZ, np.ones(3), np.ones(61))
