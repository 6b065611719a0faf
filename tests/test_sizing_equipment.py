"""Equipment of single columns: every figure by a few lines of its own, from the published formulas.

Columns are dilute enough for Y = K X to be linear, so that flows between stages come from one set of linear equations. Formulas
are written down here anew from their sources; nothing of the package is called for them.
"""

from pathlib import Path

import numpy as np
import pytest
import scenes

import leanloop
from leanloop.hydraulics import packings
from leanloop.sizing import tray_column
from leanloop.sizing.rows import rows_of

FLOWSHEETS = Path(__file__).parents[1] / "flowsheets"
R, G = 8.314462618, 9.80665
close = pytest.approx
KEY = "streams.cleaned.ratio.a"

INERT, OIL, Y_IN, X_IN, K, STAGES = 80.0, 60.0, 0.05, 0.001, 0.55, 6  # mol/s and mole ratios
MASS = {"inert": 0.029, "oil": 0.200, "a": 0.060}
TEMPERATURE, PRESSURE = 303.15, 1.2e5


def column(kind="absorber", stages=STAGES, inert=INERT, oil=OIL, y=Y_IN, x=X_IN, k=K, masses=MASS, pressure=PRESSURE,
           temperature=TEMPERATURE, hot_gas=None, **more):  # fmt: skip
    """One isothermal column in which Y = K X."""
    there = {"pressure": pressure, "temperature": temperature}
    feeds = {
        "sour": {"phase": "gas", **there, "flows": {"inert": inert, "a": inert * y}},
        "solvent": {"phase": "liquid", **there, "flows": {"oil": oil, "a": oil * x}},
    }
    feeds["sour"]["temperature"] = hot_gas or temperature
    units = {"column": {"kind": kind, "gas_in": "sour", "liquid_in": "solvent", "gas_out": "cleaned", "liquid_out": "rich",
                        "stages": stages, "equilibrium": "e"}}  # fmt: skip
    species = {"inert": {"stays_in": "gas"}, "oil": {"stays_in": "liquid"}, "a": {}}
    species = {name: {"molar_mass": masses[name], **item} for name, item in species.items()}
    equilibrium = {"e": {"a": {"model": "constant", "K": k, "basis": "ratio"}}}
    return leanloop.Flowsheet(species, equilibrium, feeds, units, **more)


def flows(stages=STAGES, inert=INERT, oil=OIL, y=Y_IN, x=X_IN, k=K):
    """Mole ratios of gas and liquid of each row: L (X_n-1 - X_n) = G K (X_n - X_n+1), the row under stage s being s."""
    matrix, right = np.zeros((stages, stages)), np.zeros(stages)
    for n in range(stages):
        matrix[n, n] = -oil - inert * k
        if n:
            matrix[n, n - 1] = oil
        if n + 1 < stages:
            matrix[n, n + 1] = inert * k
    right[0] -= oil * x
    right[-1] -= inert * y
    X = np.linalg.solve(matrix, right)
    return np.append(k * X, y), np.insert(X, 0, x)


class Own:
    """Rows of the column, by hand."""

    def __init__(self, masses=MASS, temperature=TEMPERATURE, pressure=PRESSURE, gas_density=None, liquid_density=None, **scene):
        scene = {"stages": STAGES, "inert": INERT, "oil": OIL, "y": Y_IN, "x": X_IN, "k": K, **scene}
        Y, X = flows(**scene)
        self.V, self.L = scene["inert"] * (1 + Y), scene["oil"] * (1 + X)
        self.gas = scene["inert"] * (masses["inert"] + Y * masses["a"])  # kg/s
        self.liquid = scene["oil"] * (masses["oil"] + X * masses["a"])
        self.y, self.x = Y / (1 + Y), X / (1 + X)
        self.rho_g = np.full(len(Y), gas_density) if gas_density else pressure * (self.gas / self.V) / (R * temperature)
        self.rho_l = np.full(len(Y), liquid_density) if liquid_density else None
        self.pressure, self.temperature = pressure, temperature
        k = np.append(K_of(Y[:-1], X[1:]), np.nan)  # y/x on stage n = 1..N
        self.k = np.insert(k[:-1], 0, k[0])
        self.lam = self.k * self.V / self.L

    @property
    def F(self):
        return self.liquid / self.gas * np.sqrt(self.rho_g / self.rho_l)


def K_of(Y, X):
    return (Y / (1 + Y)) / (X / (1 + X))


# --- trays


def fair(F, spacing, tension, holes=0.1, system=1.0):
    """Lygeros and Magoulas 1986 on Fair's chart; tension to the power 0.2; holes after Fair 1961."""
    holes = 1.0 if holes >= 0.1 else 5 * holes + 0.5
    return (0.0105 + 8.127e-4 * (1000 * spacing) ** 0.755 * np.exp(-1.463 * F**0.842)) * (tension / 0.02) ** 0.2 * holes * system


def treybal(F, spacing, tension, holes=0.1, system=1.0):
    """R. E. Treybal, Mass-Transfer Operations, 3rd ed. 1980, table 6.2."""
    F = np.maximum(F, 0.1)
    return ((0.0744 * spacing + 0.01173) * np.log10(1 / F) + 0.0304 * spacing + 0.015) * (tension / 0.02) ** 0.2 * system


def segment(share):
    """Angle of the chord that cuts off a share of a circle, by halving."""
    low, high = 0.0, np.pi
    for _ in range(200):
        mid = (low + high) / 2
        low, high = (mid, high) if (mid - np.sin(mid)) / (2 * np.pi) < share else (low, mid)
    return low


TRAYS = {"internals": "trays", "spacing": 0.45, "hole_area": 0.08, "system_factor": 0.85, "flood": 0.75, "rate_margin": 1.1,
         "surface_tension": 0.028, "liquid_density": 850.0, "liquid_viscosity": 1.5e-3}  # fmt: skip


def sized(entries, sheet=None, **more):
    found = leanloop.size(sheet or column(), columns={"column": entries}, **more)
    return found, found.columns["column"]


class TestTrays:
    @pytest.mark.parametrize("capacity, fit", [("fair", fair), ("treybal", treybal)])
    def test_diameter(self, capacity, fit):
        own = Own(liquid_density=850.0)
        entries = {**TRAYS, "efficiency": 0.4, "capacity": capacity, **({} if capacity == "fair" else {"hole_area": 0.1})}
        found, item = sized(entries)
        holes = entries["hole_area"]
        u = fit(own.F, 0.45, 0.028, holes, 0.85) * np.sqrt((850 - own.rho_g) / own.rho_g)
        share = np.clip(0.1 + (own.F - 0.1) / 9, 0.1, 0.2).max()  # Benitez, equation (4.34)
        area = 1.1 * own.gas / own.rho_g / (0.75 * u) / (1 - share)
        assert item.diameter_m[0] == close(np.sqrt(4 * area.max() / np.pi), rel=1e-9)
        assert item.governs[0, 0] == area.argmax() and item.flood[0, 0] == close(0.75, rel=1e-9)
        assert item.trays[0] == 15 and item.height_m[0] == close(15 * 0.45) and item.efficiency[0, 0] == close(0.4)
        assert item.volume_m3[0] == close(area.max() * 15 * 0.45, rel=1e-9)
        assert found.good[0] and found.chosen == 0

    def test_lewis(self):
        """Murphree to overall, Lewis 1936, on the lines of each stage: V from below over L from it."""
        _, item = sized({**TRAYS, "murphree": 0.55})
        lam = Own(liquid_density=850.0).lam[1:]
        overall = np.log1p(0.55 * (lam - 1)) / np.log(lam)
        needed = (1 / overall).sum()
        assert item.trays[0] == np.ceil(needed)
        assert item.efficiency[0, 0] == close(STAGES / needed, rel=1e-9)

    @pytest.mark.parametrize("k, viscosity", [(0.55, 1.5e-3), (2.5, 8e-3), (0.004, 0.2e-3)])
    def test_oconnell(self, k, viscosity):
        """O'Connell 1946; below 0.078, where the parabola would fall again, held at its peak."""
        scene = {"k": k, "oil": OIL * k / K}
        _, item = sized({**TRAYS, "oconnell": True, "liquid_viscosity": viscosity}, column(**scene))
        own = Own(liquid_density=850.0, **scene)
        z = own.k * (1000 * own.liquid / own.L) * (1000 * viscosity) / (850 * 0.0624279606)
        assert (z < 0.078).all() == (k == 0.004)
        log = np.log10(np.maximum(z, 0.078))
        each = 10 ** (1.597 - 0.199 * log - 0.0896 * log**2) / 100
        needed = (1 / each[1:]).sum()
        assert item.efficiency[0, 0] == close(STAGES / needed, rel=1e-6)
        assert item.trays[0] == np.ceil(needed)

    def test_trays_of_real_stages(self):
        """Stages with an efficiency are trays already."""
        sheet = column()
        units = {"column": {**sheet.given["units"]["column"], "efficiency": 0.7}}
        _, item = sized(TRAYS, sheet.rebuilt(units=units))
        assert item.trays[0] == STAGES

    def test_pressure_drop_and_entrainment(self):
        """Dry by the orifice, clear liquid by Bennett, Agrawal and Cook 1983, bubbles; entrainment after Fair's chart."""
        entries = {**TRAYS, "efficiency": 0.5, "diameter": 2.0, "weir_height": 0.04, "hole_diameter": 6e-3, "downcomer": 0.12}
        _, item = sized(entries)
        own, total = Own(liquid_density=850.0), np.pi
        gas, liquid = 1.1 * own.gas / own.rho_g, 1.1 * own.liquid / 850
        active, weir = total * (1 - 0.24), 2.0 * np.sin(segment(0.12) / 2)
        dry = (gas / (0.08 * active) / 0.73) ** 2 / (2 * G) * own.rho_g / 850 * (1 - 0.08**2)
        phi = np.exp(-12.55 * (gas / active * np.sqrt(own.rho_g / (850 - own.rho_g))) ** 0.91)
        clear = phi * (0.04 + (0.501 + 0.439 * np.exp(-137.8 * 0.04)) * (liquid / (weir * phi)) ** (2 / 3))
        bubble = 6 * 0.028 / (G * 850 * 6e-3)
        assert item.drop_Pa[0, 0] == close(12 * (G * 850 * (dry + clear + bubble)).mean(), rel=1e-6)
        part = gas / (total * (1 - 0.12)) / (fair(own.F, 0.45, 0.028, 0.08, 0.85) * np.sqrt((850 - own.rho_g) / own.rho_g))
        assert item.flood[0, 0] == close(part.max(), rel=1e-9)
        psi = np.exp(-(6.692 + 1.956 * part) * own.F ** (-0.132 + 0.654 * part))
        assert item.entrainment[0, 0] == close(psi.max(), rel=1e-9)

    def test_treybal_illustration_6_3(self):
        """Methanol stripper, sieve trays, from a flowsheet: diameter 1.242 m, 1.25 chosen; the top row governs what it prints."""
        gas, liquid = 100.0, 250.0  # mol/s
        into = 0.15 / 32.04 / (0.15 / 32.04 + 0.85 / 18.02)
        alcohol = liquid * into
        masses = {"inert": 0.01802, "oil": 0.01802, "a": 0.03204}
        free = {"plant": {"quantity": "streams.cleaned.fraction.a", "equals": 0.18, "free": "equilibrium.e.a.K",
                          "between": [0.2, 8.0]}}  # fmt: skip
        equilibrium = {"e": {"a": {"model": "constant", "K": 2.5, "basis": "ratio"}}}
        scene = dict(inert=82.0, y=0.0, oil=liquid - alcohol, x=alcohol / (liquid - alcohol), masses=masses)
        sheet = column("stripper", 3, k=2.5, pressure=101325.0, temperature=368.15, **scene, requirements=free)
        sheet = sheet.rebuilt(equilibrium=equilibrium)
        entries = {"internals": "trays", "spacing": 0.5, "capacity": "treybal", "flood": 0.8, "downcomer": 0.088, "efficiency": 0.6,
                   "surface_tension": 0.040, "liquid_density": 961.0, "hole_diameter": 4.5e-3}  # fmt: skip
        found, item = sized(entries, sheet)
        assert found.quantity("streams.cleaned.total_mol_s")[0, 0] == close(gas, rel=1e-9)
        assert item.diameter_m[0] == close(1.242, abs=2e-3) and item.governs[0, 0] == 0
        _, standard = sized({**entries, "standard": True}, sheet)
        assert standard.diameter_m[0] == close(1.4)
        _, rated = sized({**entries, "diameter": 1.25}, sheet)
        # V_F 3.418 m/s on 1.119 m2 of net area for 3.021 m3/s
        assert rated.flood[0, 0] == close(3.0208 / (3.4177 * np.pi / 4 * 1.25**2 * 0.912), rel=2e-3)
        assert rated.flood[0, 0] == close(0.8 * (1.242 / 1.25) ** 2, rel=2e-3)


# --- packing


PACKED = {"internals": "packing", "packing": "pall_metal_50", "hetp": 0.6, "flood": 0.65, "system_factor": 0.9, "rate_margin": 1.15}
PROPERTIES = {
    "inert": {"gas_viscosity": 1.85e-5, "diffusion_volume": 19.7e-6},
    "a": {"gas_viscosity": 0.8e-5, "liquid_density": 790.0, "liquid_viscosity": 0.5e-3, "surface_tension": 0.022,
          "diffusion_volume": 66.0e-6, "molar_volume": 74e-6},
    "oil": {"liquid_density": 870.0, "liquid_viscosity": 4e-3, "surface_tension": 0.030, "association": 1.2},
}  # fmt: skip
AREA, VOID, FACTOR, SIZE = 120.0, 0.94, 27.0, 0.050  # Pall metal 50: m2/m3, -, 1/ft of Kister and Strigle, m


def mixed():
    """Rows with properties by the mixing rules: volumes add, Wilke, Arrhenius, mole fractions, Fuller, Wilke and Chang."""
    own = Own()
    y, x = np.stack([1 - own.y, own.y]), np.stack([1 - own.x, own.x])  # inert or oil, a
    masses = np.array([MASS["oil"], MASS["a"]])[:, None]
    own.rho_l = (x * masses).sum(0) / (x * masses / np.array([[870.0], [790.0]])).sum(0)
    own.mu_l = np.exp((x * np.log([[4e-3], [0.5e-3]])).sum(0))
    own.tension = (x * [[0.030], [0.022]]).sum(0)
    mu, m = np.array([1.85e-5, 0.8e-5]), np.array([MASS["inert"], MASS["a"]])
    wilke = lambda i, j: (1 + np.sqrt(mu[i] / mu[j]) * (m[j] / m[i]) ** 0.25) ** 2 / np.sqrt(8 * (1 + m[i] / m[j]))  # noqa: E731
    phi = np.array([[wilke(i, j) for j in (0, 1)] for i in (0, 1)])
    own.mu_g = sum(y[i] * mu[i] / (phi[i] @ y) for i in (0, 1))
    own.d_g = 1e-7 * TEMPERATURE**1.75 * np.sqrt(1 / 29 + 1 / 60) / (PRESSURE / 101325 * (19.7 ** (1 / 3) + 66 ** (1 / 3)) ** 2)
    own.d_l = 7.4e-12 * np.sqrt(1.2 * 200) * TEMPERATURE / (own.mu_l * 1e3 * 74**0.6)
    return own


def kister_gill(F, factor, mu, rho_g, rho_l):
    """Flood velocity by H. Z. Kister, D. R. Gill 1991 as in J. Benitez, equations (4.6) to (4.8): 1/ft and Pa s."""
    log = np.log(F)
    Y = np.exp(-(3.5021 + 1.028 * log + 0.11093 * log**2))
    return np.sqrt(Y / (factor * mu**0.1)) * np.sqrt((rho_l - rho_g) / rho_g)


def billet_drop(u, own, L, a=112.6, eps=0.951, c_h=0.784, c_p=0.763):
    """Pressure drop by R. Billet, M. Schultes in the form of 1991, without a wall, constants of Pall metal 50."""
    re_l, fr = L * own.rho_l / (a * own.mu_l), L**2 * a / G
    share = np.where(re_l < 5, c_h * re_l**0.15 * fr**0.1, 0.85 * c_h * re_l**0.25 * fr**0.1)
    h = np.cbrt(12 * fr / re_l) * share ** (2 / 3)
    re_g = 6 * u * own.rho_g / (a * own.mu_g)
    dry = c_p * (64 / re_g + 1.8 / re_g**0.08) * a / eps**3 * own.rho_g * u**2 / 2
    return dry * (eps / (eps - h)) ** 1.5 * np.exp(re_l / 200)


class TestPacking:
    def sized(self, **entries):
        return sized({**PACKED, **entries}, column(properties=PROPERTIES))

    def test_diameter_height_and_drop(self):
        own = mixed()
        _, item = self.sized()
        u = 0.9 * kister_gill(own.F, FACTOR, own.mu_l, own.rho_g, own.rho_l)
        area = 1.15 * own.gas / own.rho_g / (0.65 * u)
        wide = np.sqrt(4 * area.max() / np.pi)
        assert item.diameter_m[0] == close(wide, rel=1e-9)
        assert item.governs[0, 0] == area.argmax() and item.flood[0, 0] == close(0.65, rel=1e-9)
        assert item.height_m[0] == close(0.6 * STAGES, rel=1e-12) and item.hetp_m[0, 0] == close(0.6, rel=1e-12)
        velocity = 1.15 * own.gas / own.rho_g / area.max()
        each = billet_drop(velocity, own, 1.15 * own.liquid / own.rho_l / area.max())
        assert item.drop_Pa[0, 0] == close(0.6 * each[1:].sum(), rel=1e-6)
        wetting = own.liquid / own.rho_l / area.max() / (AREA * 0.08 / 3600)
        assert item.wetting[0, 0] == close(wetting.min(), rel=1e-9)

    def test_onda(self):
        """Film coefficients by Onda, Takeuchi and Okumoto 1968, heights of both films, HETP of each stage."""
        own = mixed()
        entries = {key: value for key, value in PACKED.items() if key != "hetp"}
        _, item = sized({**entries, "transfer": "onda"}, column(properties=PROPERTIES))
        area = np.pi / 4 * item.diameter_m[0] ** 2
        L, V = own.liquid / area, own.gas / area
        froude, weber = L**2 * AREA / (own.rho_l**2 * G), L**2 / (own.rho_l * own.tension * AREA)
        spread = 1.45 * (0.075 / own.tension) ** 0.75 * (L / (AREA * own.mu_l)) ** 0.1 * froude**-0.05 * weber**0.2
        wet = AREA * (1 - np.exp(-spread))
        k_l = 0.0051 * (L / (wet * own.mu_l)) ** (2 / 3) * (own.mu_l / (own.rho_l * own.d_l)) ** -0.5 * (AREA * SIZE) ** 0.4
        k_l = k_l * np.cbrt(own.mu_l * G / own.rho_l)
        k_g = 5.23 * (V / (AREA * own.mu_g)) ** 0.7 * np.cbrt(own.mu_g / (own.rho_g * own.d_g)) * (AREA * SIZE) ** -2
        k_g = k_g * AREA * own.d_g / (R * TEMPERATURE)
        h_g = own.V / area / (k_g * wet * PRESSURE)
        h_l = own.L / area / (k_l * wet * own.rho_l / (own.liquid / own.L))
        hetp = (h_g + own.lam * h_l) * np.log(own.lam) / (own.lam - 1)
        assert item.hetp_m[0, 0] == close(hetp[1:].mean(), rel=1e-5)
        assert item.height_m[0] == close(hetp[1:].sum(), rel=1e-5)

    @pytest.mark.parametrize("way", ["leva", "eckert", "billet_schultes", "stichlmair"])
    def test_other_methods_are_near(self, way):
        """Published methods agree within some 30 % in velocity (reference table, section 2.6), so within 15 % in width."""
        packing = "pall_metal_35" if way == "stichlmair" else "pall_metal_25"
        one = self.sized(packing=packing)[1]
        other = self.sized(packing=packing, flood_by=way)[1]
        assert other.diameter_m[0] == close(one.diameter_m[0], rel=0.16)
        assert other.diameter_m[0] != one.diameter_m[0]

    @pytest.mark.parametrize("by", ["billet_schultes", "robbins"])
    def test_most_drop(self, by):
        """Asked for a tenth of the drop, the worst row has just that; asked for more than flood makes, nothing changes."""
        free = self.sized(drop_by=by)[1]
        most = free.drop_Pa[0, 0] / free.height_m[0] / 3
        item = self.sized(drop_by=by, most_drop=most)[1]
        assert item.diameter_m[0] > 1.05 * free.diameter_m[0]
        assert item.drop_Pa[0, 0] / item.height_m[0] <= most * (1 + 1e-9)
        assert item.drop_Pa[0, 0] / item.height_m[0] > 0.7 * most
        assert self.sized(drop_by=by, most_drop=1e6)[1].diameter_m[0] == close(free.diameter_m[0], rel=1e-12)
        if by == "billet_schultes":
            own, area = mixed(), np.pi / 4 * item.diameter_m[0] ** 2
            each = billet_drop(1.15 * own.gas / own.rho_g / area, own, 1.15 * own.liquid / own.rho_l / area)
            assert each.max() == close(most, rel=1e-6)

    def test_packing_of_its_own(self):
        """Given by its numbers, the same packing gives the same column; flood knows nothing but the factor."""
        own = dict(specific_area=AREA, void_fraction=VOID, packing_factor=FACTOR / 0.3048, nominal_size=SIZE)
        entries = {key: value for key, value in PACKED.items() if key != "packing"}
        _, item = sized({**entries, **own}, column(properties=PROPERTIES))
        assert item.diameter_m[0] == close(self.sized()[1].diameter_m[0], rel=1e-9)
        assert np.isnan(item.drop_Pa[0, 0])

    def test_height_of_the_flowsheet(self):
        """A column of given height and HETP is packed with that HETP."""
        sheet = column(properties=PROPERTIES)
        unit = {key: item for key, item in sheet.given["units"]["column"].items() if key != "stages"}
        sheet = sheet.rebuilt(units={"column": {**unit, "height": 4.2, "hetp": 0.7}})
        entries = {key: value for key, value in PACKED.items() if key != "hetp"}
        _, item = sized(entries, sheet)
        assert item.hetp_m[0, 0] == close(0.7) and item.height_m[0] == close(4.2)
        assert item.diameter_m[0] == close(self.sized()[1].diameter_m[0], rel=1e-9)

    def test_benitez_illustration_4_4(self):
        """Ethanol from carbon dioxide into water, 50 mm metal rings: 58.3 % of flood at 0.7368 m (recomputed), 0.738 m printed."""
        kmol_h = 1000 / 3600
        masses = {"inert": 0.04401, "oil": 0.01802, "a": 0.04607}
        free = {"plant": {"quantity": "units.column.results.removal.a", "equals": 0.97, "free": "equilibrium.e.a.K",
                          "between": [0.3, 2.0]}}  # fmt: skip
        scene = dict(inert=176.4 * kmol_h, y=3.6 / 176.4, oil=151.5 * kmol_h, x=0.0, k=0.57, pressure=1.1e5, temperature=303.0)
        sheet = column(stages=6, masses=masses, requirements=free, **scene)
        sheet = sheet.rebuilt(equilibrium={"e": {"a": {"model": "constant", "K": 0.57, "basis": "ratio"}}})
        entries = {"internals": "packing", "specific_area": 92.3, "void_fraction": 0.977, "packing_factor": 16 / 0.3048,
                   "hetp": 0.5, "liquid_density": 986.0, "liquid_viscosity": 6.31e-4, "gas_viscosity": 1.45e-5}  # fmt: skip
        _, item = sized({**entries, "diameter": 0.7368}, sheet)
        assert item.flood[0, 0] == close(0.583, abs=2e-3) and item.governs[0, 0] == 6
        _, item = sized({**entries, "flood": 0.583}, sheet)
        assert item.diameter_m[0] == close(0.7368, rel=2e-3) and item.diameter_m[0] == close(0.738, rel=5e-3)


# --- both


BOTH = {"trays": {**TRAYS, "efficiency": 0.4}, "packing": {**PACKED, "liquid_density": 860.0, "liquid_viscosity": 3e-3,
                                                           "gas_viscosity": 1.8e-5}}  # fmt: skip


@pytest.mark.parametrize("internals", BOTH)
class TestBoth:
    def test_rating_undoes_sizing(self, internals):
        _, item = sized(BOTH[internals])
        _, rated = sized({**BOTH[internals], "diameter": float(item.diameter_m[0])})
        assert rated.flood[0, 0] == close(BOTH[internals]["flood"], rel=1e-9)
        for key in ("drop_Pa", "height_m", "governs", "volume_m3"):
            assert getattr(rated, key) == close(getattr(item, key), rel=1e-12)
        _, narrow = sized({**BOTH[internals], "diameter": float(item.diameter_m[0] / 2)})
        assert narrow.flood[0, 0] == close(4 * BOTH[internals]["flood"], rel=1e-9)

    @pytest.mark.parametrize("entry, value", [("system_factor", 0.6), ("rate_margin", 1.4), ("flood", 0.5)])
    def test_width_goes_with_the_root(self, internals, entry, value):
        """Area goes with the flows, and against system factor and part of flood."""
        base = {**BOTH[internals], "downcomer": 0.1} if internals == "trays" else BOTH[internals]
        _, item = sized(base)
        _, other = sized({**base, entry: value})
        ratio = (value / base[entry]) ** (0.5 if entry == "rate_margin" else -0.5)
        assert other.diameter_m[0] == close(item.diameter_m[0] * ratio, rel=1e-9)

    @pytest.mark.parametrize("inert", [0.5, 3.0, 9.0, 30.0, 200.0])
    def test_standard_sizes(self, internals, inert):
        sheet = column(inert=inert, oil=OIL / INERT * inert)
        _, item = sized(BOTH[internals], sheet)
        _, wide = sized({**BOTH[internals], "standard": True}, sheet)
        step = 0.1 if item.diameter_m[0] <= 1 else 0.2
        assert wide.diameter_m[0] / step == close(round(wide.diameter_m[0] / step), abs=1e-9)
        assert item.diameter_m[0] <= wide.diameter_m[0] * (1 + 1e-9) < item.diameter_m[0] + step * (1 + 1e-9)
        assert wide.flood[0, 0] <= BOTH[internals]["flood"] * (1 + 1e-9)

    def test_scale(self, internals):
        """Ten times the flows: ten times the area, the same height."""
        _, one = sized(BOTH[internals])
        _, ten = sized(BOTH[internals], column(inert=10 * INERT, oil=10 * OIL))
        assert ten.diameter_m[0] ** 2 == close(10 * one.diameter_m[0] ** 2, rel=1e-9)
        assert ten.height_m[0] == close(one.height_m[0], rel=1e-9)

    def test_ends(self, internals):
        _, one = sized(BOTH[internals])
        _, more = sized({**BOTH[internals], "ends": 2.5})
        assert more.height_m[0] == close(one.height_m[0] + 2.5, rel=1e-12)

    def test_worst_row_governs(self, internals):
        """An absorber that takes up much is fullest at its foot; a stripper of rich liquid at its head."""
        _, item = sized(BOTH[internals], column(y=0.3, x=0.0))
        assert item.governs[0, 0] == STAGES
        _, item = sized(BOTH[internals], column("stripper", y=0.0, x=0.4, k=1.5))
        assert item.governs[0, 0] == 0

    def test_gas_as_warm_as_it_is_fed(self, internals):
        """Below the lowest stage the gas has its own temperature, which makes it lighter, hence wider there."""
        _, cold = sized(BOTH[internals])
        _, hot = sized(BOTH[internals], column(hot_gas=453.15))
        assert hot.governs[0, 0] == STAGES
        assert hot.diameter_m[0] > 1.05 * cold.diameter_m[0]

    def test_turndown(self, internals):
        """The feed case of least flows tells the least percent of flood; the width is that of the largest."""
        cases = {"low": {"feeds.sour.flows.inert": 0.4 * INERT, "feeds.sour.flows.a": 0.4 * INERT * Y_IN,
                         "feeds.solvent.flows.oil": 0.4 * OIL, "feeds.solvent.flows.a": 0.4 * OIL * X_IN}}  # fmt: skip
        found, item = sized(BOTH[internals], cases=cases)
        table = found.table()
        assert table["columns.column.flood"][0] == close(BOTH[internals]["flood"], rel=1e-9)
        assert table["columns.column.least_flood"][0] == close(0.4 * BOTH[internals]["flood"], rel=1e-9)
        assert item.diameter_m[0] == close(sized(BOTH[internals])[1].diameter_m[0], rel=1e-12)
        assert "low" in str(found)

    def test_missing_properties(self, internals):
        """One fault for each, with its address and the way round it."""
        entries = {key: value for key, value in BOTH[internals].items()
                   if key not in ("liquid_density", "liquid_viscosity", "surface_tension", "gas_viscosity")}  # fmt: skip
        with pytest.raises(leanloop.InputError) as caught:
            sized(entries)
        liquid = ("liquid_density", "surface_tension") if internals == "trays" else ("liquid_density", "liquid_viscosity")
        expected = {f"properties.{name}.{key}" for name in ("oil", "a") for key in liquid}
        if internals == "packing":
            expected |= {f"properties.{name}.gas_viscosity" for name in ("inert", "a")}
        assert sorted(fault.address for fault in caught.value.faults) == sorted(expected)
        assert all("sizing.columns.column" in fault.remedy for fault in caught.value.faults)

    def test_missing_molar_mass(self, internals):
        sheet = column()
        species = {name: {key: item for key, item in own.items() if key != "molar_mass" or name != "oil"}
                   for name, own in sheet.given["components"].items()}  # fmt: skip
        with pytest.raises(leanloop.InputError) as caught:
            sized(BOTH[internals], sheet.rebuilt(components=species))
        assert [fault.address for fault in caught.value.faults] == ["components.oil.molar_mass"]

    def test_all_designs_as_one(self, internals):
        """Columns of unequal height solved together have the rows of each by itself."""
        stages = [2, 3, 7, 12]
        found = leanloop.size(column(), stages={"column": {"from": 2, "to": 12}}, columns={"column": BOTH[internals]})
        for count in stages:
            own = leanloop.size(column(stages=count), columns={"column": BOTH[internals]})
            for key in ("diameter_m", "height_m", "flood", "drop_Pa", "governs", "volume_m3", "trays", "hetp_m", "entrainment"):
                many, one = getattr(found.columns["column"], key)[count - 2], getattr(own.columns["column"], key)[0]
                assert many == close(one, rel=1e-9, nan_ok=True), key


class TestFaults:
    @pytest.mark.parametrize("entries, address", [
        ({"drop_by": "stichlmair"}, "drop_by"),
        ({"flood_by": "stichlmair"}, "flood_by"),
        ({"packing": "saddle_ceramic_50", "most_drop": 200.0}, "most_drop"),
        ({"packing": "saddle_ceramic_50", "drop_by": "billet_schultes"}, "drop_by"),
        ({"packing": "raschig_ceramic_50", "drop_by": "billet_schultes"}, "drop_by"),
        ({"packing": "raschig_ceramic_50", "hetp": None, "transfer": "billet_schultes"}, "transfer"),
        ({"packing": "pall_metal_90", "hetp": None, "transfer": "onda"}, "specific_area"),
        ({"packing": "pall_metal_76"}, "flood_by"),
        ({"packing": "no_such_50"}, "packing"),
        ({"hetp": None}, "hetp"),
        ({"transfer": "onda"}, "hetp"),
        ({"efficiency": 0.5}, "efficiency"),
        ({"key": "oil"}, "key"),
    ])  # fmt: skip
    def test_constants_that_are_not_there(self, entries, address):
        """What a method lacks is told when it is read, not as a column without answer."""
        entries = {key: value for key, value in {**PACKED, **entries}.items() if value is not None}
        with pytest.raises(leanloop.InputError) as caught:
            sized(entries, column(properties=PROPERTIES))
        assert [fault.address for fault in caught.value.faults] == [f"sizing.columns.column.{address}"]
        assert caught.value.faults[0].remedy

    def test_every_named_packing_works_or_is_refused(self):
        """No choice of packing and methods ends in an exception of another sort, or silently ignores a limit."""
        for name in packings.names():
            for more in ({}, {"most_drop": 150.0}, {"drop_by": "robbins"}, {"flood_by": "leva"}, {"flood_by": "eckert"},
                         {"transfer": "onda"}, {"transfer": "billet_schultes"}):  # fmt: skip
                entries = {"internals": "packing", "packing": name, **({} if "transfer" in more else {"hetp": 0.5}), **more}
                try:
                    found, item = sized(entries, column(properties=PROPERTIES))
                except leanloop.InputError:
                    continue
                assert found.good[0], (name, more, found.reasons)
                if "most_drop" in more:
                    assert item.drop_Pa[0, 0] / item.height_m[0] <= 150.0 * (1 + 1e-9), name


class TestCautions:
    def test_ranges_that_are_left(self):
        """Each names the correlation, the figure and its range."""
        entries = {**TRAYS, "oconnell": True, "hole_diameter": 0.02, "weir_height": 0.1, "liquid_viscosity": 1e-4}
        found, _ = sized(entries, column(oil=1.0))
        said = "\n".join(found.cautions())
        for words in ("hole diameter", "weir to spacing", "flow parameter"):
            assert f"flood (fair): {words}" in said
        assert "efficiency (O'Connell)" in said
        assert all(item.startswith("Column column: ") for item in found.cautions())
        assert all(item in str(found) for item in ["flood (fair): hole diameter"])

    def test_nothing_is_said_inside(self):
        found, _ = sized({**TRAYS, "efficiency": 0.5, "hole_area": 0.1, "spacing": 0.6})
        assert not [item for item in found.cautions() if "outside the range" in item]

    def test_flooded_column(self):
        for entries in BOTH.values():
            found, _ = sized({**entries, "diameter": 0.6})
            assert "Column column: the column floods." in found.cautions()

    def test_narrow_and_dry(self):
        found, _ = sized({**BOTH["packing"]}, column(inert=0.5, oil=0.02))
        said = "\n".join(found.cautions())
        assert "ten packing pieces" in said and "may not wet" in said

    def test_robbins_by_the_wrong_factor(self):
        found, _ = sized({**BOTH["packing"], "drop_by": "robbins"})
        assert any("dry bed" in item for item in found.cautions())


# --- boiled columns


HEAT = """
title = "Boiled"
[feeds.rich]
phase = "liquid"
temperature = "92 degC"
pressure = "8 bar"
flows = { water = "310 kmol/h", H2S = "2.4 kmol/h", buffer = "14 kmol/h" }
[feeds.side]
phase = "liquid"
temperature = "100 degC"
pressure = "2.2 bar"
flows = { water = "60 kmol/h" }
[units.strip]
kind = "stripper"
liquid_in = "rich"
gas_out = "acid_gas"
liquid_out = "lean"
stages = 6
equilibrium = "hot"
pressure = "1.7 bar"
pressure_drop = "0.08 bar"
reboiler = { duty = "1500 kW" }
condenser = { temperature = "45 degC" }
side_feeds = [{ stream = "side", stage = 3 }]
side_draws = [{ stream = "drawn", stage = 4, phase = "liquid", flow = "30 kmol/h" }]
[components]
water = { molar_mass = "18.015 g/mol" }
H2S = { molar_mass = "34.08 g/mol" }
buffer = { molar_mass = "140 g/mol", stays_in = "liquid" }
[equilibrium.hot.water]
model = "raoult"
vapour_pressure = { form = "antoine", A = 5.19621, B = 1730.63, C = 233.426, pressure = "bar", temperature = "degC" }
[equilibrium.hot.H2S]
model = "henry"
constant = "60 bar"
slope = "3900 K"
at = "25 degC"
[heat_data.buffer]
liquid_heat_capacity = "260 J/(mol K)"
[heat_data.H2S]
gas_heat_capacity = "34.2 J/(mol K)"
heat_of_vaporisation = { value = "32 kJ/mol", at = "25 degC" }
[sizing]
stages = { strip = [6, 8] }
[sizing.columns.strip]
internals = "trays"
murphree = 0.5
key = "H2S"
downcomer = 0.12
liquid_density = "980 kg/m3"
surface_tension = "58 mN/m"
"""


class TestBoiled:
    @pytest.mark.parametrize("warm, governing", [("92 degC", {3}), ("150 degC", {0})])
    def test_rows_of_reboiler_and_condenser(self, tmp_path, warm, governing):
        """Reflux and feed run onto the top stage, the reboiler's vapour rises into the lowest, as warm as it is."""
        found = leanloop.size(scenes.read(tmp_path, HEAT.replace("92 degC", warm)))
        assert found.good.all() and found.count == 3
        masses = {"water": 0.018015, "H2S": 0.03408, "buffer": 0.140}
        for design, count in enumerate((6, 7, 8)):
            own = found.sheet.solve({"units.strip.stages": count})
            told = own.to_dict()["units"]["strip"]["profile"]
            places = np.array(told["stage"])
            assert list(places) == list(range(0, count + 2))  # condenser, stages, reboiler
            V, L = np.array(told["gas_mol_s"]), np.array(told["liquid_mol_s"])
            gas = V * sum(mass * np.nan_to_num(np.array(told["y"][name], float)) for name, mass in masses.items())
            liquid = L * sum(mass * np.nan_to_num(np.array(told["x"][name], float)) for name, mass in masses.items())
            T, P = np.array(told["temperature_K"]), np.array(told["pressure_Pa"])
            up, down = slice(1, count + 2), slice(0, count + 1)  # from stages 1 to N and reboiler; from condenser and stages
            liquid_down = liquid[down].copy()  # the condenser returns all it condenses
            liquid_down[0] += (310 * masses["water"] + 2.4 * masses["H2S"] + 14 * masses["buffer"]) / 3.6
            rho = P[up] * gas[up] / V[up] / (R * T[up])
            F = liquid_down / gas[up] * np.sqrt(rho / 980)
            u = fair(F, 0.5, 0.058) * np.sqrt((980 - rho) / rho)
            area = gas[up] / rho / (0.8 * u) / 0.88
            item = found.columns["strip"]
            assert item.diameter_m[design] == close(np.sqrt(4 * area.max() / np.pi), rel=1e-6)
            assert item.governs[design, 0] == area.argmax() and area.argmax() in governing
            K_key = np.array(told["K"]["H2S"], float)[1 : count + 1]
            lam = K_key * V[2 : count + 2] / L[1 : count + 1]
            needed = (np.log(lam) / np.log1p(0.5 * (lam - 1))).sum()
            assert item.efficiency[design, 0] == close(count / needed, rel=1e-6)


# --- exchangers


def test_exchanger_area(tmp_path):
    """UA over the coefficient, the largest of the feed cases."""
    sheet = leanloop.read(FLOWSHEETS / "wash_oil_pair.toml")
    cases = {"more": {"feeds.gas.flow": 1.05 * sheet.numbers["feeds.gas.flow"]}}
    found = leanloop.size(sheet, stages={"wash": [10], "strip": [9]}, cases=cases, exchangers={"swap": {"coefficient": 350.0}})
    UA = found.quantity("units.swap.results.UA_W_K")[0]
    duty = found.quantity("units.swap.results.duty_W")[0]
    assert (duty > 0).all() and found.areas["swap"][0] == close(UA.max() / 350.0, rel=1e-12) and UA[1] != UA[0]
    ends = [found.quantity(f"streams.{name}.temperature_K")[0] for name in ("lean", "warm_rich", "warm_oil", "rich_up")]
    one, two = ends[0] - ends[1], ends[2] - ends[3]
    assert UA == close(duty / ((one - two) / np.log(one / two)), rel=0.05)  # heat capacities change along the exchanger
    assert "exchanger swap" in str(found)


# --- sections between side streams


def test_each_section_between_side_streams_is_told_by_itself():
    text = (Path(__file__).resolve().parents[1] / "flowsheets" / "ammonia_wash.toml").read_text(encoding="utf-8")
    sheet = leanloop.read(Path(__file__).resolve().parents[1] / "flowsheets" / "ammonia_wash.toml")
    assert 'stage = 4 }' in text and 'stage = 7, phase = "liquid"' in text
    columns = {"wash": {"internals": "trays", "liquid_density": 990.0, "surface_tension": 0.068}}
    found = leanloop.size(sheet, hold=["emission"], stages={"wash": [9, 9]}, columns=columns)
    item = found.columns["wash"]
    assert sorted(item.sections[0]) == [0, 4, 7]
    # the worst section sets the width of the whole, and the bottom one carries the most gas
    assert max(item.sections[0].values()) == pytest.approx(item.diameter_m[0], rel=1e-12)
    assert item.sections[0][0] < item.sections[0][4] < item.sections[0][7]
    # a row belongs to one section alone: each is at most as wide as the widest row says, and one row reaches it
    rows = rows_of(found.result.parts[0], item.spec, {})
    wide = tray_column.diameters(item.spec, rows)[0]
    for start, end in ((0, 4), (4, 7), (7, 10)):
        assert item.sections[0][start] == pytest.approx(wide[start:end].max(), rel=1e-12)
    assert "stage 4 to stage 7" in str(found)
