"""How much faster ``fit_batch`` is than the same fit by lmfit in a loop, and how near both come to the bound.

    python tests/benchmarks/fit_batch.py

One core. Sweeps of 401 points that obey the circuit, drawn from a seed, with noise proportional to |Z|. lmfit fits the
same five parameters with weights 1/|z|, from the conductance peak and its half-power width, without a Jacobian. The
bound is the Cramér–Rao bound of each sweep's own true values; a sweep that did not converge counts as an error.
"""

from __future__ import annotations

import os
import sys
import time

import lmfit
import numpy as np
from numpy.typing import NDArray

from harness.fitting import fit_batch

POINTS = 401
SWEEPS = 4000
BY_LMFIT = 150
NOISE = 1e-3  # standard deviation of the real and of the imaginary part, over |Z|
NAMES = ("fs", "r1", "q", "c0", "tan_delta")
SPEED, NEARNESS = 30.0, 1.05
Floats = NDArray[np.float64]
Complexes = NDArray[np.complex128]


def impedance(f: Floats, fs: Floats, r1: Floats, q: Floats, c0: Floats, tan_delta: Floats) -> Complexes:
    """R1, L1, C1 in series beside a lossy C0, at ``f`` in hertz."""
    y_0 = 2j * np.pi * f * c0 * (1 - 1j * tan_delta)
    return 1 / (y_0 + 1 / (r1 * (1 + 1j * q * (f / fs - fs / f))))


def drawn(rng: np.random.Generator, count: int) -> dict[str, Floats]:
    """True values, ``(count, 1)`` each: invented discs about 1.65 MHz."""
    spread = {
        "fs": (1.63e6, 1.67e6),
        "r1": (1.0, 10.0),
        "q": (80.0, 300.0),
        "c0": (1.2e-9, 1.9e-9),
        "tan_delta": (4e-3, 2e-2),
    }
    return {name: rng.uniform(*ends, (count, 1)) for name, ends in spread.items()}


def bound(f: Floats, true: dict[str, Floats]) -> Floats:
    """Least standard deviation of each parameter over its value, ``(5, count)``: J of ln Z by central differences."""
    step = 1e-6
    slopes = []
    for name in NAMES:
        up, down = ({**true, name: true[name] * (1 + sign * step)} for sign in (1, -1))
        slopes.append((np.log(impedance(f, **up)) - np.log(impedance(f, **down))) / (2 * step))
    jacobian = np.stack(slopes)
    information = np.einsum("abn,cbn->bac", jacobian.real, jacobian.real) + np.einsum(
        "abn,cbn->bac", jacobian.imag, jacobian.imag
    )
    return NOISE * np.sqrt(np.diagonal(np.linalg.inv(information), axis1=1, axis2=2)).T


def start(f: Floats, z: Complexes) -> dict[str, float]:
    """Conductance peak and its half-power width; C0 and loss from the ends of the sweep."""
    y = 1 / z
    top = int(np.argmax(y.real))
    wide = f[y.real > y.real[top] / 2]
    c0 = float(np.mean(y.imag[[0, -1]] / (2 * np.pi * f[[0, -1]])))
    width = max(float(wide[-1] - wide[0]), float(f[1] - f[0]))
    return {"fs": float(f[top]), "r1": float(1 / y.real[top]), "q": float(f[top]) / width, "c0": c0, "tan_delta": 0.01}


def by_lmfit(f: Floats, sweeps: Complexes) -> Floats:
    """The five values of each sweep, ``(5, count)``; NaN where lmfit gave up."""
    model = lmfit.Model(impedance, independent_vars=["f"])
    found = np.full((len(NAMES), len(sweeps)), np.nan)
    for k, z in enumerate(sweeps):
        fit = model.fit(z, model.make_params(**start(f, z)), f=f, weights=1 / np.abs(z))
        if fit.success:
            found[:, k] = [fit.params[name].value for name in NAMES]
    return found


def by_batch(f: Floats, sweeps: Complexes) -> Floats:
    fit = fit_batch(f, sweeps)
    return np.stack([fit.fs_hz, fit.r1_ohm, fit.q, fit.c0_f, fit.tan_delta])


def nearness(found: Floats, true: dict[str, Floats], least: Floats) -> Floats:
    """rms error over the bound, by parameter, ``(5,)``; NaN where a sweep has no value."""
    truth = np.stack([true[name][:, 0] for name in NAMES])
    return np.sqrt(np.mean(((found / truth - 1) / least) ** 2, axis=1))


def on_one_core() -> None:
    """Start again on one core with one thread a library, unless that is so already."""
    threads = {f"{library}_NUM_THREADS": "1" for library in ("OMP", "OPENBLAS", "MKL")}
    if threads.items() <= os.environ.items():
        return
    if hasattr(os, "sched_setaffinity"):
        os.sched_setaffinity(0, {min(os.sched_getaffinity(0))})
    os.execve(sys.executable, [sys.executable, *sys.argv], {**os.environ, **threads})


def main() -> None:
    """Print the ratio and the distances from the bound."""
    on_one_core()
    rng = np.random.default_rng(20261120)
    f = np.linspace(1.55e6, 1.75e6, POINTS)
    true = drawn(rng, SWEEPS)
    clean = impedance(f, **true)
    noise = rng.normal(size=(2, *clean.shape))
    sweeps = clean + NOISE * np.abs(clean) * (noise[0] + 1j * noise[1])
    by_batch(f, sweeps[:50])  # whatever is made once
    before = time.perf_counter()
    ours = by_batch(f, sweeps)
    ours_s = (time.perf_counter() - before) / SWEEPS
    before = time.perf_counter()
    theirs = by_lmfit(f, sweeps[:BY_LMFIT])
    theirs_s = (time.perf_counter() - before) / BY_LMFIT
    both = np.isfinite(ours[0, :BY_LMFIT]) & np.isfinite(theirs[0])
    least = bound(f, true)
    lost = int(np.sum(~np.isfinite(ours[0])))
    print(f"{SWEEPS} sweeps of {POINTS} points by fit_batch: {1e6 * ours_s:.0f} µs a sweep, {lost} not converged")
    print(f"{BY_LMFIT} of them by lmfit in a loop: {1e6 * theirs_s:.0f} µs a sweep, {int(np.sum(~both))} not converged")
    ratio = theirs_s / ours_s
    print(f"ratio {ratio:.0f} (target at least {SPEED:g}: {'met' if ratio >= SPEED else 'NOT met'})")
    near = nearness(ours, true, least)
    word = "met" if lost == 0 and np.all(near <= NEARNESS) else "NOT met"
    told = ", ".join(f"{name} {one:.3f}" for name, one in zip(NAMES, near, strict=True))
    print(f"rms error over the Cramér–Rao bound: {told} (target at most {NEARNESS}: {word})")
    shared = {name: value[:BY_LMFIT][both] for name, value in true.items()}
    near = nearness(theirs[:, both], shared, least[:, :BY_LMFIT][:, both])
    told = ", ".join(f"{name} {one:.3f}" for name, one in zip(NAMES, near, strict=True))
    print(f"lmfit over the bound, on its {BY_LMFIT}: {told}")


if __name__ == "__main__":
    main()
