"""Published single-branch circuits and what follows from them; shared by the tests of circuits and of fitting.

Derived values were solved with 40 digits and printed to 10; the sources of the element values are named beside each.
"""

from __future__ import annotations

from dataclasses import dataclass

from harness.circuits.resonator import Circuit, from_elements


@dataclass(frozen=True, slots=True)
class Example:
    """Elements of one published circuit (F, ohm, H, F)."""

    c0: float
    r1: float
    l1: float
    c1: float

    @property
    def circuit(self) -> Circuit:
        return from_elements(self.r1, self.l1, self.c1, self.c0)


_TUD = "open data of seven transducers, github TUDA-MUST, transducers.json, MIT; doi:10.1109/OJUFFC.2026.3673287"

EXAMPLES = {
    # Sedra & Smith, Microelectronic Circuits, exercise on oscillators (attribution from memory)
    "sedra_2MHz": Example(4e-12, 120, 0.52, 0.012e-12),
    # quartz worked example of electronics-tutorials (attribution from memory)
    "etut_10MHz": Example(28.68e-12, 6.4, 2.546e-3, 0.09972e-12),
    # W. Hilberg, Funkuhrtechnik (1988), 77.5 kHz crystal, as given in Kolchuzhin/LMGT_MEMS_component_library
    "hilberg_77k5": Example(1.25e-12, 17e3, 3127.11, 1.35e-15),
    # Link, dissertation (2007), film bulk acoustic resonator, as given in the same repository
    "link_fbar_1G96": Example(1.60e-12, 2.77, 79.8e-9, 82.5e-15),
    # textbook exercise, as given on studyx.ai
    "millman_1M08": Example(1e-12, 5e3, 0.3344, 0.065e-12),
    # the rest: _TUD
    "bolt40_1": Example(4.07569e-9, 21.05, 0.03515, 4.4862e-10),
    "bolt40_2": Example(3.9701e-9, 24.764, 0.038959, 4.0033e-10),
    "air40": Example(2.401881144e-9, 643.186339335, 0.0688719499245, 2.30489066295e-10),
    "bolt41": Example(3.397e-9, 17.2, 0.03252, 4.641e-10),
    "bolt40_highq": Example(4.42179e-9, 7.12, 0.02558, 6.1774e-10),
    "bolt28": Example(3.012e-9, 20.07, 0.07247, 4.484e-10),
    "custom508": Example(1.2e-8, 3.50, 0.000029, 3.39e-9),
}

COLUMNS = ("fs", "fp", "r", "qm", "m", "keff", "fm", "fr", "fa", "fn", "zm", "zn", "ct")
DERIVED = {
    "sedra_2MHz": (
        2014780.954, 2017800.862, 333.3333333, 54856.71572, 164.5701472, 0.05469028176, 2014780.843, 2014781.066,
        2017800.751, 2017800.974, 119.9955696, 3240398.8, 4.012e-12,
    ),
    "etut_10MHz": (
        9988489.032, 10005838.89, 287.6052948, 24966.52454, 86.80829245, 0.05886374007, 9988486.728, 9988491.337,
        10005836.58, 10005841.19, 6.399150933, 48067.61837, 2.877972e-11,
    ),
    "hilberg_77k5": (
        77460.74475, 77502.56226, 925.9259259, 89527.35906, 96.68954778, 0.0328456216, 77460.74028, 77460.74922,
        77502.55779, 77502.56674, 16998.18199, 158776286.9, 1.25135e-12,
    ),
    "link_fbar_1G96": (
        1961515353.0, 2011450071.0, 19.39393939, 355.0542392, 18.30748421, 0.221436617, 1961364958.0, 1961666706.0,
        2011294877.0, 2011596721.0, 2.761785593, 885.5099844, 1.6825e-12,
    ),
    "millman_1M08": (
        1079519.071, 1114051.128, 15.38461538, 453.6348922, 29.48626799, 0.2470483027, 1079478.769, 1079559.472,
        1114009.436, 1114090.179, 4994.26279, 4086576.355, 1.065e-12,
    ),
    "bolt40_1": (
        40079.11761, 42227.34309, 9.0849494, 420.5050822, 46.2859025, 0.3148930955, 40078.08858, 40080.14773,
        42226.25778, 42228.31974, 21.04018417, 40644.52302, 4.52431e-9,
    ),
    "bolt40_2": (
        40300.19643, 42283.2659, 9.917068419, 398.3584527, 40.16897291, 0.3026543943, 40298.93809, 40301.45652,
        42281.94384, 42284.46518, 24.74867239, 36320.31939, 4.37043e-9,
    ),
    "air40": (
        39946.04416, 41818.79409, 10.42080296, 26.87566465, 2.579039711, 0.2959045755, 39697.28227, 40306.01001,
        41445.31784, 42054.98352, 568.5677911, 4418.578753, 2.63237021e-9,
    ),
    "bolt28": (
        27919.53617, 29925.66893, 6.717216771, 633.4304784, 94.29954399, 0.3599727703, 27919.3025, 27919.7699,
        29925.4184, 29925.88693, 20.06774356, 155361.8996, 3.4604e-9,
    ),
}  # fmt: skip
