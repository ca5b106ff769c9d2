"""Values that the program must reproduce: one table, each row with its source.

Lengths in nm, energies in eV, times in fs, masses in electron masses, unless the
row says a.u. (Hartree atomic units). The energy of a packet is that of its central
momentum. The formulas stand in the sources named; their numbers were computed by at
least two independent routes and agree to the digits printed. "(from memory)" marks
a citation that was not looked up.
"""

from collections.abc import Iterable, Mapping
from dataclasses import dataclass
from decimal import Decimal
from typing import Any

HBAR = 0.6582119569509067  # eV fs
HBAR2_PER_2ME = 0.03809982110968584  # eV nm^2
BOHR = 0.0529177210544  # nm
MASS = 0.067  # GaAs conduction band, electron masses

CODATA = "Mohr, Newell, Taylor, Tiesinga, CODATA 2022"
COHEN = "Cohen-Tannoudji, Diu, Laloe, Quantum Mechanics, complement G_I (from memory)"
LANDAU = "Landau, Lifshitz, Quantum Mechanics, section 25 (from memory)"
BENDANIEL = "BenDaniel, Duke, Phys. Rev. 152, 683 (1966) (from memory)"
ECKART = "Eckart, Phys. Rev. 35, 1303 (1930) (from memory)"
ECKART_SET = (
    "Eckart 1930; parameters of Seideman, Miller, J. Chem. Phys. 95, 1768 (1991) (from memory)"
)
SADDLE = "Buttiker, Phys. Rev. B 41, 7906 (1990) (from memory)"
DOUBLE = "layer matrices; Tsu, Esaki, Appl. Phys. Lett. 22, 562 (1973) (from memory)"
DECAY = "pole of the double barrier; Ricco, Azbel, Phys. Rev. B 29, 1970 (1984) (from memory)"
BAIN = "Bain, Bardsley, Junker, Sukumar, J. Phys. B 7, 2189 (1974) (from memory)"
HUSIMI = "Husimi, Prog. Theor. Phys. 9, 381 (1953) (from memory)"
MORSE = "Morse, Phys. Rev. 34, 57 (1929); HF set of Walker, Preston (1977) (from memory)"
HENON = "Davis, Heller, J. Chem. Phys. 71, 3383 (1979) (from memory)"
SOFT = "Javanainen, Eberly, Su, Phys. Rev. A 38, 3430 (1988) (from memory)"
SLITS = "two free Gaussians added: " + COHEN
TIEN = "Tien, Gordon, Phys. Rev. 129, 647 (1963) (from memory)"
MATCHING = "mode matching: Buttiker, Landauer, Phys. Rev. Lett. 49, 1739 (1982) (from memory)"
SQUARE = "Landau, Lifshitz, Quantum Mechanics, section 22 (from memory)"
AIRY = "NIST Digital Library of Mathematical Functions, section 9.9 (from memory)"


@dataclass(frozen=True)
class Row:
    """One value: which check, what it is, for what, as printed, in what unit, whence."""

    check: str
    quantity: str
    parameters: Mapping[str, Any]
    printed: str
    unit: str
    source: str

    @property
    def value(self) -> float:
        """The number."""
        return float(self.printed)

    @property
    def uncertainty(self) -> float:
        """One unit of the last digit printed."""
        exponent = Decimal(self.printed).as_tuple().exponent
        return float(10.0 ** int(exponent))

    @property
    def id(self) -> str:
        """A name for test reports."""
        shown = (f"{k}={v:g}" for k, v in self.parameters.items() if isinstance(v, (int, float)))
        return f"{self.check} {self.quantity} {' '.join(shown)}"


def _table(
    check: str,
    quantity: str,
    source: str,
    unit: str,
    fixed: Mapping[str, Any],
    key: str,
    values: Iterable[tuple[Any, str]],
) -> list[Row]:
    """Return the rows of a quantity tabulated against one parameter."""
    return [
        Row(check, quantity, {**fixed, key: at}, printed, unit, source) for at, printed in values
    ]


def _row(
    check: str, quantity: str, source: str, unit: str, printed: str, **parameters: complex
) -> list[Row]:
    """Return one row, as a list."""
    return [Row(check, quantity, parameters, printed, unit, source)]


_CONSTANTS = _table(
    "P1", "constant", CODATA, "", {}, "name",
    [
        ("hbar^2/2m_e [eV nm^2]", "0.0380998211097"),
        ("hbar [eV fs]", "0.65821195695"),
        ("hartree [eV]", "27.21138624598"),
        ("bohr [nm]", "0.0529177210544"),
        ("atomic time [fs]", "0.0241888432659"),
        ("proton mass [m_e]", "1836.152673427"),
        ("atomic mass unit [m_e]", "1822.888486283"),
        ("k_B 300 K [eV]", "25.851999786e-3"),
        ("k_B 77 K [eV]", "6.635346612e-3"),
    ],
)  # fmt: skip

_FREE = {"mass": MASS, "sigma": 5.0, "energy": 0.1}
_FREE_PACKET = [
    *_table(
        "P2", "free_shift", COHEN, "nm", _FREE, "t",
        [(50.0, "36.22916290860"), (100.0, "72.45832581721"), (200.0, "144.91665163442")],
    ),
    *_table(
        "P2", "free_width", COHEN, "nm", _FREE, "t",
        [(50.0, "9.98192439002"), (100.0, "17.98764181633"), (200.0, "34.91734572458")],
    ),
    *_row("P2", "free_mean_energy", COHEN, "eV", "0.10568654046", **_FREE),
    *_row("P2", "free_width", COHEN, "nm", "19.96384878004", mass=MASS, sigma=10.0, energy=0.05,
          t=200.0),
    *_row("P2", "free_shift", COHEN, "nm", "102.47154707755", mass=MASS, sigma=10.0, energy=0.05,
          t=200.0),
    *_table(
        "P2", "free_covariance", COHEN, "nm^2",
        {"mass": MASS, "widths": (4.0, 8.0), "degrees": 30.0, "t": 100.0}, "entry",
        [((0, 0), "407.02523003"), ((0, 1), "130.71330318"), ((1, 1), "256.09050848")],
    ),
]  # fmt: skip

_SLAB = {"mass": MASS, "height": 0.3, "width": 4.0}
_BARRIER = [
    *_table(
        "P3", "rectangular_barrier", LANDAU, "", _SLAB, "energy",
        [
            (0.05, "0.0110313224"), (0.10, "0.0305191088"), (0.15, "0.0636050735"),
            (0.20, "0.1176160516"), (0.25, "0.2013533937"), (0.30, "0.3215179631"),
            (0.35, "0.4751402059"), (0.40, "0.6426189802"), (0.50, "0.9017947003"),
            (0.80, "0.9819162979"), (0.6507744049, "1.0000000000"),
        ],
    ),
    *_row("P3", "rectangular_barrier", LANDAU, "", "0.0702400", mass=MASS, height=0.3, width=3.9,
          energy=0.15),
    *_row("P3", "rectangular_barrier", LANDAU, "", "0.0575775", mass=MASS, height=0.3, width=4.1,
          energy=0.15),
    *_row("P4", "packet_rectangular", LANDAU, "", "0.0685198240", **_SLAB, energy=0.15, sigma=10.0),
    *_row("P4", "packet_rectangular", LANDAU, "", "0.0849516506", **_SLAB, energy=0.15, sigma=5.0),
    *_row("P4", "packet_rectangular", LANDAU, "", "0.3360759519", **_SLAB, energy=0.30, sigma=10.0),
    *_row("P4", "packet_rectangular", LANDAU, "", "0.2047033792", **_SLAB, energy=0.25, sigma=20.0),
]  # fmt: skip

_STEPS = [
    *_table(
        "P5", "sharp_step", LANDAU, "", {"mass": MASS, "height": 0.1}, "energy",
        [
            (0.11, "0.7119798994"), (0.15, "0.9282032303"), (0.2, "0.9705627485"),
            (0.3, "0.9897948557"), (0.5, "0.9968943800"),
        ],
    ),
    *_table(
        "P5", "smooth_step_reflection", LANDAU, "", {"mass": MASS, "height": 0.1, "width": 1.0},
        "energy",
        [
            (0.11, "0.1459630050"), (0.12, "0.0657465612"), (0.15, "0.0135088819"),
            (0.2, "0.0022780571"), (0.3, "0.0001866820"),
        ],
    ),
    *_table(
        "P5", "mass_step", BENDANIEL, "", {"mass": MASS, "beyond": 0.15}, "energy",
        [(0.02, "0.9604774896"), (0.2, "0.9604774896")],
    ),
]  # fmt: skip

_SECH2_WELL = {"mass": MASS, "width": 4.0}
_SECH2 = [
    *_table(
        "P6", "sech2_barrier", ECKART_SET, "",
        {"mass": 1060.0, "height": 0.425, "width": BOHR / 1.36}, "energy",
        [
            (0.20, "2.8538258024e-4"), (0.25, "2.4509329265e-3"), (0.30, "1.6910458444e-2"),
            (0.35, "9.3368946466e-2"), (0.40, "3.5263746576e-1"), (0.425, "5.4643577231e-1"),
            (0.45, "7.2252152860e-1"), (0.50, "9.1958458990e-1"), (0.60, "9.9445262298e-1"),
        ],
    ),
    *_table(
        "P6", "sech2_barrier", ECKART, "", {"mass": MASS, "height": 0.2, "width": 2.0}, "energy",
        [
            (0.05, "4.3822968202e-2"), (0.10, "1.8229328312e-1"), (0.15, "4.2326534468e-1"),
            (0.20, "6.6620054766e-1"), (0.25, "8.2797956989e-1"), (0.30, "9.1426818646e-1"),
            (0.40, "9.7766639239e-1"),
        ],
    ),
    *_row("P6", "packet_sech2", ECKART, "", "0.4294454909", mass=MASS, height=0.2, width=2.0,
          energy=0.15, sigma=10.0),
    *_table(
        "P6", "sech2_whole_well", LANDAU, "", {**_SECH2_WELL, "strength": 2.0}, "energy",
        [(0.002, "1.0000000000"), (0.02, "1.0000000000")],
    ),
    *_table(
        "P6", "sech2_whole_well", LANDAU, "", {**_SECH2_WELL, "strength": 1.5}, "energy",
        [(0.002, "0.3998101070"), (0.005, "0.6838092677"), (0.02, "0.9647375501")],
    ),
    *_table(
        "P6", "sech2_level", LANDAU, "eV", {**_SECH2_WELL, "depth": 0.2132452674}, "number",
        [(0, "-0.1421635116"), (1, "-0.0355408779")],
    ),
]  # fmt: skip

_SADDLE = {"height": 0.0, "quantum_x": 1e-3, "quantum_y": 3e-3}
_RIDGE = {"mass": MASS, "height": 0.02, "width": 20.0, "quantum_y": 0.01}
_CONSTRICTION = [
    *_table(
        "P7", "saddle_sum", SADDLE, "", _SADDLE, "energy",
        [(1.0e-3, "0.04142383"), (1.5e-3, "0.50000001"), (2.0e-3, "0.95857632"),
         (4.5e-3, "1.50000000")],
    ),
    *_row("P7", "saddle_mode", SADDLE, "", "0.99991931", **_SADDLE, energy=6.0e-3, mode=1),
    *_table(
        "P7", "channel_sech2", ECKART, "", {**_RIDGE, "mode": 0}, "energy",
        [(0.020, "4.98775952e-2"), (0.025, "5.52390717e-1"), (0.030, "9.52212287e-1"),
         (0.040, "9.99598332e-1")],
    ),
    *_table(
        "P7", "channel_sech2", ECKART, "", {**_RIDGE, "mode": 1}, "energy",
        [(0.020, "9.41605238e-6"), (0.025, "1.23898384e-3"), (0.030, "4.98775952e-2"),
         (0.040, "9.52212287e-1")],
    ),
    *_table(
        "P7", "channel_sech2_sum", ECKART, "", _RIDGE, "energy",
        [(0.020, "0.04988701"), (0.025, "0.55362970"), (0.030, "1.00209930"),
         (0.040, "2.00169763")],
    ),
]  # fmt: skip

STACK_A = {"mass": MASS, "barrier_mass": MASS, "barrier": 2.0, "well": 5.0, "height": 0.5}
STACK_B = {"mass": MASS, "barrier_mass": MASS, "barrier": 3.0, "well": 5.0, "height": 0.3}
STACK_B_THICK = {**STACK_B, "barrier": 5.0}
STACK_C = {**STACK_B, "barrier_mass": 0.092}
STACK_C_THICK = {**STACK_C, "barrier": 5.0}


def _resonance(
    check: str, source: str, stack: Mapping[str, Any], pole: tuple[str, str], peak: tuple[str, str]
) -> list[Row]:
    """Return the four rows of one resonance: pole, its width, peak, its width."""
    near = {**stack, "near": float(pole[0])}
    rows = [("pole_energy", pole[0]), ("pole_width", pole[1])]
    rows += [("peak_energy", peak[0]), ("peak_width", peak[1])]
    return [Row(check, quantity, near, printed, "eV", source) for quantity, printed in rows]


_DOUBLE = [
    *_resonance("P8", DOUBLE, STACK_A, ("105.372188e-3", "6.4321313e-3"),
                ("105.508908e-3", "6.4651428e-3")),
    *_row("P8", "pole_energy", DOUBLE, "eV", "400.708768e-3", **STACK_A, near=0.4),
    *_row("P8", "pole_width", DOUBLE, "eV", "66.7941061e-3", **STACK_A, near=0.4),
    *_resonance("P8", DOUBLE, STACK_B, ("88.501528e-3", "4.7066158e-3"),
                ("88.598711e-3", "4.7298035e-3")),
    *_row("P8", "pole_lifetime", DOUBLE, "fs", "139.84824", **STACK_B, near=0.0885),
    *_resonance("P8", DOUBLE, STACK_B_THICK, ("89.534838e-3", "0.4161468e-3"),
                ("89.535842e-3", "0.4161754e-3")),
    *_table(
        "P8", "double_barrier", DOUBLE, "", STACK_B, "energy",
        [
            (0.05, "8.6931720755e-4"), (0.10, "5.9779801145e-2"), (0.15, "1.1846506144e-2"),
            (0.20, "2.1379212516e-2"), (0.25, "8.0539177315e-2"), (0.30, "6.0673879380e-1"),
            (0.35, "6.9099382912e-1"),
        ],
    ),
    *_resonance("P9", BENDANIEL, STACK_C, ("81.405100e-3", "2.3539442e-3"),
                ("81.430397e-3", "2.3570578e-3")),
    *_row("P9", "pole_lifetime", BENDANIEL, "fs", "279.62089", **STACK_C, near=0.0814),
    *_resonance("P9", BENDANIEL, STACK_C_THICK, ("81.804174e-3", "0.1292908e-3"),
                ("81.804278e-3", "0.1292917e-3")),
    *_table(
        "P9", "double_barrier", BENDANIEL, "", STACK_C, "energy",
        [
            (0.05, "4.1304361376e-4"), (0.10, "7.7661688089e-3"), (0.15, "3.3466214254e-3"),
            (0.20, "7.5323429160e-3"), (0.25, "3.9085335336e-2"), (0.30, "7.7879640385e-1"),
            (0.35, "2.7165607006e-1"),
        ],
    ),
    *_row("P10", "prepared_energy", DECAY, "eV", "89.627e-3", mass=MASS, height=0.3, well=5.0),
    *_row("P10", "pole_width", DECAY, "eV", "4.7066e-3", **STACK_B, near=0.0885),
]  # fmt: skip

_RESONANCE_AU = [
    *_row("P11", "exponential_resonance_energy", BAIN, "a.u.", "3.426390310", near=3.4 - 0.01j),
    *_row("P11", "exponential_resonance_width", BAIN, "a.u.", "0.025548961", near=3.4 - 0.01j),
    *_row("P11", "exponential_resonance_energy", BAIN, "a.u.", "4.8348068", near=4.8 - 1.1j),
    *_row("P11", "exponential_resonance_width", BAIN, "a.u.", "2.235753", near=4.8 - 1.1j),
]

_TRAP_PARAMETERS = {"mass": MASS, "quantum": 0.01}
_COHERENT = {**_TRAP_PARAMETERS, "center": 20.0, "k0": 0.0}
_SQUEEZED = {**_TRAP_PARAMETERS, "center": 15.0, "k0": 0.1}
_HALF = {**_TRAP_PARAMETERS, "sigma": 3.7704576858}
_TRAP = [
    *_row("P12", "trap_period", HUSIMI, "fs", "413.56676969", **_TRAP_PARAMETERS),
    *_row("P12", "trap_ground_width", HUSIMI, "nm", "7.5409153716", **_TRAP_PARAMETERS),
    *_row("P12", "trap_mean", HUSIMI, "nm", "1.030121570", **_COHERENT, t=100.0),
    *_row("P12", "trap_overlap", HUSIMI, "", "0.0355816208", **_COHERENT, t=100.0),
    *_row("P12", "trap_mean", HUSIMI, "nm", "12.130576400", **_SQUEEZED, t=100.0),
    *_row("P12", "trap_width", HUSIMI, "nm", "15.063064273", **_HALF, t=100.0),
    *_row("P12", "trap_width", HUSIMI, "nm", "15.0818307432", **_HALF, t=413.56676969 / 4),
]  # fmt: skip

_MORSE = [
    *_table(
        "P13", "morse_level", MORSE, "a.u.",
        {"depth": 0.2251, "stiffness": 1.1741, "mass": 1744.59}, "number",
        [
            (0, "0.00933165"), (1, "0.02740233"), (2, "0.04468285"), (3, "0.06117321"),
            (4, "0.07687340"), (5, "0.09178343"), (10, "0.15448112540"), (20, "0.22061427916"),
            (23, "0.22504604296"),
        ],
    ),
]  # fmt: skip

_HENON = [
    *_table(
        "P14", "henon_heiles_level", HENON, "a.u.", {"coupling": 0.111803}, "number",
        [
            (0, "0.9985948"), (1, "1.9900768"), (2, "1.9900768"), (3, "2.9562433"),
            (4, "2.9853265"), (5, "2.9853265"), (6, "3.9259643"), (7, "3.9259643"),
            (8, "3.9824174"), (9, "3.9857610"), (10, "4.8701450"), (11, "4.8986450"),
            (13, "4.9862511"), (15, "5.8170205"), (17, "5.8670159"), (18, "5.8814470"),
            (19, "5.9913271"),
        ],
    ),
    *_table(
        "P14", "henon_heiles_level", HENON, "a.u.", {"coupling": 0.1118}, "number",
        [
            (0, "0.9985949"), (1, "1.9900774"), (3, "2.9562457"), (4, "2.9853274"),
            (6, "3.9259684"), (8, "3.9824186"), (9, "3.9857618"), (10, "4.8701521"),
            (11, "4.8986507"),
        ],
    ),
]  # fmt: skip

_SOFT_CORE = [
    *_table(
        "P15", "soft_core_level", SOFT, "a.u.", {"softening2": 1.0}, "number",
        [(0, "-0.6697771382"), (1, "-0.27489135"), (2, "-0.15145467"), (3, "-0.09267932")],
    ),
    *_table(
        "P15", "soft_core_level", SOFT, "a.u.", {"softening2": 2.0}, "number",
        [(0, "-0.5000000000"), (1, "-0.23290334"), (2, "-0.13382886")],
    ),
]  # fmt: skip

_SLIT = {"mass": 1.0, "separation": 100.0, "sigma": 10.0}
_TWO_SLITS = [
    *_table("P16", "fringe_period", SLITS, "nm", _SLIT, "t",
            [(2000.0, "25.4026120112"), (10000.0, "74.9099152984")]),
    *_table("P16", "fringe_far_field", SLITS, "nm", _SLIT, "t",
            [(2000.0, "14.5477901867"), (10000.0, "72.7389509335")]),
    *_table("P16", "slit_density", SLITS, "1/nm", {**_SLIT, "t": 2000.0}, "y",
            [(0.0, "2.497894808e-4"), (25.4026120112, "3.611218626e-3")]),
    *_row("P16", "free_width", SLITS, "nm", "58.7412664501", mass=1.0, sigma=10.0, energy=0.1,
          t=10000.0),
]  # fmt: skip

_ORDERS = (-3, -2, -1, 0, 1, 2, 3)


def _sidebands(fixed: Mapping[str, float], printed: str, total: str) -> list[Row]:
    """Return the rows of one oscillating region: orders -3 to 3, and their sum."""
    values = zip(_ORDERS, printed.split(), strict=True)
    rows = _table("P18", "sideband", MATCHING, "", fixed, "order", values)
    return [*rows, Row("P18", "sideband_sum", fixed, total, "", MATCHING)]


_WIDE = {"mass": MASS, "amplitude": 0.05, "quantum": 0.05, "length": 30.0}
_SLOW = {"mass": MASS, "amplitude": 0.01, "quantum": 0.01, "length": 100.0, "energy": 0.205}
_HALF_SPACE = {"mass": MASS, "amplitude": 0.05, "quantum": 0.05}
_DRIVEN = [
    *_table("P18", "half_space_limit", TIEN, "", {"amplitude": 0.05, "quantum": 0.05}, "order",
            [(0, "0.5855274995"), (1, "0.1936445180"), (-1, "0.1936445180"),
             (2, "0.0132028108"), (3, "0.0003827248")]),
    *_table("P18", "half_space_sideband", TIEN, "", {**_HALF_SPACE, "energy": 0.32}, "order",
            [(-1, "0.193801"), (0, "0.584481"), (1, "0.193761")]),
    *_table("P18", "half_space_sideband", TIEN, "", {**_HALF_SPACE, "energy": 1.02}, "order",
            [(-1, "0.193659"), (0, "0.585426"), (1, "0.193658")]),
    *_table("P18", "half_space_sideband", TIEN, "", {**_HALF_SPACE, "energy": 10.02}, "order",
            [(-1, "0.193645"), (0, "0.585526"), (1, "0.193645")]),
    *_sidebands({**_WIDE, "energy": 0.32},
                ".00707118 .07075999 .32071582 .23792996 .30929849 .04934991 .00281404",
                "0.99848972"),
    *_sidebands(_SLOW, ".00235229 .03948008 .28349116 .36045738 .27773667 .03451807 .00168792",
                "0.99984907"),
    *_sidebands({**_WIDE, "energy": 1.02},
                ".00034147 .01171724 .18101819 .62167995 .17493406 .00992099 .00023071",
                "0.99985132"),
    *_table("P18", "fast_limit", TIEN, "", {**_WIDE, "energy": 0.32}, "order",
            [(0, "0.239342"), (1, "0.317247"), (-2, "0.058619"), (3, "0.004289")]),
]  # fmt: skip

_WELLS = [
    *_table("P20", "finite_well_level", SQUARE, "eV",
            {"mass": MASS, "depth": 0.3, "width": 10.0}, "number",
            [(0, "34.2084404471e-3"), (1, "132.5902275816e-3"), (2, "271.5042807022e-3")]),
    *_table("P20", "triangular_well_level", AIRY, "eV", {"mass": MASS, "slope": 5e-3}, "number",
            [(0, "56.6405122666e-3"), (1, "99.0303309418e-3"), (2, "133.7352318643e-3")]),
]  # fmt: skip

ROWS: tuple[Row, ...] = (
    *_CONSTANTS, *_FREE_PACKET, *_BARRIER, *_STEPS, *_SECH2, *_CONSTRICTION, *_DOUBLE,
    *_RESONANCE_AU, *_TRAP, *_MORSE, *_HENON, *_SOFT_CORE, *_TWO_SLITS, *_DRIVEN, *_WELLS,
)  # fmt: skip


def rows(check: str, quantity: str = "") -> tuple[Row, ...]:
    """Return the rows of one check, all quantities or one; KeyError if there are none."""
    found = tuple(r for r in ROWS if r.check == check and quantity in {"", r.quantity})
    if not found:
        raise KeyError(f"{check} {quantity}")
    return found
