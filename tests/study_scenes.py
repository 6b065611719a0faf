"""A closed pair for the tests of studies, and its closed forms.

Isothermal, Y = K X in both columns, so that the loop is linear in whatever enters it: the solvent goes round by
wash > strip > divide > top_up, and the make-up gives what the wash receives. SI numbers throughout.
"""

import numpy as np

import leanloop

OIL = 2.0  # mol/s in circulation
GAS, STEAM = 30.0, 1.6  # mol/s of air and of stripping gas
K_COLD, K_HOT = 0.05, 1.9
STAGES = 5, 4
MASS = {"air": 0.029, "steam": 0.018, "oil": 0.25, "tar": 0.4, "salt": 0.107, "solute": 0.078}


def pair(bleed=0.01, solute=0.3, steam=None, gas=None, composition=None, reactions=None, removal=None, hold=None, components=(),
         equilibrium=None, stays=None, **more):
    """The pair as a flowsheet.

    Parameters
    ----------
    bleed : float
        Share of the lean solvent.
    solute : float
        With the gas, mol/s.
    steam, gas : dict of str to float, optional
        What else comes with the stripping gas and with the gas, mol/s.
    composition : dict, optional
        Of what the make-up adds.
    reactions, removal : optional
        Of a `degradation` and of a `cleanup` behind the stripper.
    hold : dict, optional
        Of the make-up; `OIL` of oil.
    components : iterable of str
        Which of tar and salt, and what else, there is.
    equilibrium : dict, optional
        The tables "cold" and "hot".
    stays : dict, optional
        Phase in which a component stays where it is not the usual one; None for both.
    """
    usual = {"air": "gas", "steam": "gas", "oil": "liquid", "tar": "liquid", "salt": "liquid", "amine": "liquid"}
    stays = {name: phase for name, phase in {**usual, **(stays or {})}.items() if phase}
    species = {}
    for name in ("air", "steam", "solute", "oil", *components):
        species[name] = {"molar_mass": MASS.get(name, 0.05)} | ({"stays_in": stays[name]} if name in stays else {})
    ratio = lambda K: {"solute": {"model": "constant", "K": K, "basis": "ratio"}}  # noqa: E731
    feeds = {
        "vent": {"phase": "gas", "temperature": 300.0, "pressure": 1.1e5,
                 "flows": {"air": GAS, "solute": solute, **(gas or {})}},
        "steam": {"phase": "gas", "temperature": 420.0, "pressure": 1.1e5, "flows": {"steam": STEAM, **(steam or {})}},
    }  # fmt: skip
    units = {
        "wash": {"kind": "absorber", "gas_in": "vent", "liquid_in": "lean", "gas_out": "cleaned", "liquid_out": "rich",
                 "stages": STAGES[0], "equilibrium": "cold", "temperature": 300.0},
        "strip": {"kind": "stripper", "gas_in": "steam", "liquid_in": "rich", "gas_out": "overhead", "liquid_out": "stripped",
                  "stages": STAGES[1], "equilibrium": "hot", "temperature": 420.0},
    }  # fmt: skip
    last = "stripped"
    if reactions:
        units["age"] = {"kind": "degradation", "takes": last, "gives": "aged", "reactions": reactions}
        last = "aged"
    if removal:
        units["bed"] = {"kind": "cleanup", "takes": last, "gives": "polished", "rejects": "sludge", "removal": removal}
        last = "polished"
    units["divide"] = {"kind": "splitter", "takes": last, "gives": ["spent", "kept"], "shares": {"spent": bleed}}
    units["top_up"] = {"kind": "makeup", "takes": "kept", "gives": "lean", "hold": hold or {"oil": OIL}}
    if composition:
        units["top_up"]["composition"] = composition
    more.setdefault("basis", {"liquid": ["oil"]})
    return leanloop.Flowsheet(species, equilibrium or {"cold": ratio(K_COLD), "hot": ratio(K_HOT)}, feeds, units, **more)


def taken(factor, stages):
    """Kremser (1930): what a cascade takes of what it could, (A + ... + A^N)/(1 + A + ... + A^N), for any number at A = 1."""
    powers = np.asarray(factor, float)[..., None] ** np.arange(stages + 1)
    return powers[..., 1:].sum(-1) / powers.sum(-1)


def linear(solute, steam_ratio=0.0, makeup_ratio=0.0, bleed=0.0, oil=OIL, steam=STEAM, gas=GAS, K=(K_COLD, K_HOT)):
    """Closed form of the pair: mole ratios of the lean solvent behind the make-up, behind the stripper, rich, and cleaned.

    X_rich = X_lean (1 - E_A/A) + (E_A/A) Y_f/K1 and X_out = (1 - E_S) X_rich + E_S Y_s/K2 (Kremser for both columns);
    the make-up gives X_lean = (1 - p) X_out + p X_m, for what it adds is p of the oil.
    """
    feed = solute / gas
    A, S = oil / (K[0] * gas), K[1] * steam / oil
    absorbed, stripped = taken(A, STAGES[0]), taken(S, STAGES[1])
    own = (1 - stripped) * absorbed / A * feed / K[0] + stripped * steam_ratio / K[1]
    lean = ((1 - bleed) * own + bleed * makeup_ratio) / (1 - (1 - bleed) * (1 - stripped) * (1 - absorbed / A))
    rich = lean * (1 - absorbed / A) + absorbed / A * feed / K[0]
    out = (1 - stripped) * rich + stripped * steam_ratio / K[1]
    return lean, out, rich, feed - absorbed * (feed - K[0] * lean)
