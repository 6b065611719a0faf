"""Constants of the built-in heat data, each with its range and source."""

from __future__ import annotations

POLING = "B. E. Poling, J. M. Prausnitz, J. P. O'Connell, The Properties of Gases and Liquids, 5th ed., 2001, appendix A"
PERRY = "Perry's Chemical Engineers' Handbook, 8th ed., 2008, table 2-153"
CRC = "CRC Handbook of Chemistry and Physics, table of enthalpies of vaporisation"
ZABRANSKY = (
    "M. Zabransky, Z. Kolska, V. Ruzicka, E. S. Domalski, J. Phys. Chem. Ref. Data 39 (2010) 013103, recommended spline"
)
AIR = "mixture of 78.12 % nitrogen, 20.96 % oxygen and 0.92 % argon, with cp = 2.5 R for argon; " + POLING
SULFUR_DIOXIDE = (
    POLING + "; with a0 = 4.147: 4.417, as the constant is also found, misses the 40.05 J/(mol K) at 298.15 K of the same"
    " table by 5 %"
)
PROPANE = (
    "fit within 0.4 % to the saturated liquid of the equation of state of E. W. Lemmon, M. O. McLinden, W. Wagner,"
    " J. Chem. Eng. Data 54 (2009) 3141"
)
O_XYLENE = "fit within 0.2 % to " + ZABRANSKY

# Other ways of writing a species: letters of either case, hyphens and underscores left out.
NAMES: dict[str, tuple[str, ...]] = {
    "air": (),
    "nitrogen": ("N2",),
    "oxygen": ("O2",),
    "hydrogen": ("H2",),
    "carbon monoxide": ("CO", "carbonmonoxide"),
    "carbon dioxide": ("CO2", "carbondioxide"),
    "hydrogen sulfide": ("H2S", "hydrogensulfide", "hydrogensulphide"),
    "sulfur dioxide": ("SO2", "sulfurdioxide", "sulphurdioxide"),
    "ammonia": ("NH3",),
    "methane": ("CH4",),
    "ethane": ("C2H6",),
    "propane": ("C3H8", "npropane"),
    "n-butane": ("nbutane", "butane", "nC4", "nC4H10"),
    "n-pentane": ("npentane", "pentane", "nC5", "nC5H12"),
    "n-hexane": ("nhexane", "hexane", "nC6", "nC6H14"),
    "cyclohexane": (),
    "benzene": ("C6H6",),
    "toluene": ("methylbenzene",),
    "ethylbenzene": (),
    "o-xylene": ("oxylene", "orthoxylene"),
    "m-xylene": ("mxylene", "metaxylene"),
    "p-xylene": ("pxylene", "paraxylene"),
    "methanol": ("MeOH", "CH3OH"),
    "ethanol": ("EtOH", "C2H5OH"),
    "2-propanol": ("2propanol", "isopropanol", "propan2ol", "IPA"),
    "acetone": ("propanone", "2propanone"),
    "butanone": ("2butanone", "MEK", "methylethylketone"),
    "ethyl acetate": ("ethylacetate", "EtOAc"),
    "dichloromethane": ("DCM", "CH2Cl2", "methylenechloride"),
    "water": ("H2O", "steam"),
    "monoethanolamine": ("MEA", "ethanolamine"),
    "diethanolamine": ("DEA",),
    "methyldiethanolamine": ("MDEA", "Nmethyldiethanolamine"),
    "triethylene glycol": ("TEG", "triethyleneglycol"),
    "propylene carbonate": ("propylenecarbonate",),
}

# Ideal gas: cp/R = a0 + a1 T + a2 T^2 + a3 T^3 + a4 T^4, as a0, a1 10^3, a2 10^5, a3 10^8, a4 10^11, and the range in K.
GAS: dict[str, tuple[float, float, float, float, float, float, float]] = {
    "nitrogen": (3.539, -0.261, 0.007, 0.157, -0.099, 200, 1000),
    "oxygen": (3.630, -1.794, 0.658, -0.600, 0.179, 200, 1000),
    "hydrogen": (2.883, 3.681, -0.772, 0.692, -0.213, 250, 1000),
    "carbon monoxide": (3.912, -3.913, 1.182, -1.300, 0.515, 200, 1000),
    "carbon dioxide": (3.259, 1.356, 1.502, -2.374, 1.056, 200, 1000),
    "hydrogen sulfide": (4.266, -3.438, 1.319, -1.331, 0.488, 200, 1000),
    "sulfur dioxide": (4.147, -2.234, 2.344, -3.271, 1.393, 200, 1000),
    "ammonia": (4.238, -4.215, 2.041, -2.126, 0.761, 200, 1000),
    "methane": (4.568, -8.975, 3.631, -3.407, 1.091, 200, 1000),
    "ethane": (4.178, -4.427, 5.660, -6.651, 2.487, 200, 1000),
    "propane": (3.847, 5.131, 6.011, -7.893, 3.079, 200, 1000),
    "n-butane": (5.547, 5.536, 8.057, -10.571, 4.134, 200, 1000),
    "n-pentane": (7.554, -0.368, 11.846, -14.939, 5.753, 200, 1000),
    "n-hexane": (8.831, -0.166, 14.302, -18.314, 7.124, 200, 1000),
    "cyclohexane": (4.035, -4.433, 16.834, -20.775, 7.746, 250, 1000),
    "benzene": (3.551, -6.184, 14.365, -19.807, 8.234, 250, 1000),
    "toluene": (3.866, 3.558, 13.356, -18.659, 7.690, 200, 1000),
    "ethylbenzene": (4.544, 10.578, 13.644, -19.276, 7.885, 200, 1000),
    "o-xylene": (3.289, 34.144, 4.989, -8.335, 3.338, 200, 1000),
    "m-xylene": (4.002, 17.537, 10.590, -15.037, 6.008, 200, 1000),
    "p-xylene": (4.113, 14.909, 11.810, -16.724, 6.736, 200, 1000),
    "methanol": (4.714, -6.986, 4.211, -4.443, 1.535, 200, 1000),
    "ethanol": (4.396, 0.628, 5.546, -7.024, 2.685, 200, 1000),
    "2-propanol": (3.334, 18.853, 3.644, -6.115, 2.543, 200, 1000),
    "acetone": (5.126, 1.511, 5.731, -7.177, 2.728, 200, 1000),
    "butanone": (6.349, 11.062, 4.851, -6.484, 2.469, 200, 1000),
    "ethyl acetate": (10.228, -14.948, 13.033, -15.736, 5.999, 298, 1000),
    "dichloromethane": (2.710, 11.561, 0.324, -1.370, 0.662, 200, 1000),
    "water": (4.395, -4.186, 1.405, -1.564, 0.632, 200, 1000),
}
AIR_FRACTIONS = {"nitrogen": 0.7812, "oxygen": 0.2096}  # the rest, argon, is monatomic
GAS_SOURCES = {"air": AIR, "sulfur dioxide": SULFUR_DIOXIDE}  # all others POLING

# Liquid: coefficients of cp in T in K, their unit, the range in K, the source.
LIQUID: dict[str, tuple[tuple[float, ...], str, tuple[float, float], str]] = {
    "propane": ((876.6829, -13.05421, 0.08043862, -2.188577e-4, 2.259262e-7), "J/(mol K)", (200, 330), PROPANE),
    "n-butane": ((191030, -1675, 12.5, -0.03874, 4.6121e-5), "J/(kmol K)", (200, 340), PERRY),
    "n-pentane": ((159080, -270.5, 0.99537), "J/(kmol K)", (200, 390), PERRY),
    "n-hexane": ((172120, -183.78, 0.88734), "J/(kmol K)", (200, 430), PERRY),
    "cyclohexane": ((-220600, 3118.3, -9.4216, 0.010687), "J/(kmol K)", (280, 400), PERRY),
    "benzene": ((162940, -344.94, 0.85562), "J/(kmol K)", (279, 500), PERRY),
    "toluene": ((140140, -152.3, 0.695), "J/(kmol K)", (200, 450), PERRY),
    "ethylbenzene": ((154040, -142.29, 0.80539), "J/(kmol K)", (200, 409), PERRY),
    "o-xylene": ((141.413, -0.0381588, 7.63213e-4, -3.78171e-7), "J/(mol K)", (252, 450), O_XYLENE),
    "m-xylene": ((133860, 7.8754, 0.52265), "J/(kmol K)", (230, 500), PERRY),
    "p-xylene": ((-35500, 1287.2, -2.599, 0.002426), "J/(kmol K)", (287, 500), PERRY),
    "methanol": ((105800, -362.23, 0.9379), "J/(kmol K)", (200, 400), PERRY),
    "ethanol": ((102640, -139.63, -0.030341, 0.0020386), "J/(kmol K)", (200, 375), PERRY),
    "2-propanol": ((471710, -4172.1, 14.745, -0.0144), "J/(kmol K)", (200, 355), PERRY),
    "acetone": ((135600, -177, 0.2837, 6.89e-4), "J/(kmol K)", (200, 329), PERRY),
    "butanone": ((132300, 200.87, -0.9597, 0.0019533), "J/(kmol K)", (200, 373), PERRY),
    "ethyl acetate": ((226230, -624.8, 1.472), "J/(kmol K)", (200, 350), PERRY),
    "dichloromethane": ((98968, -62.941, 0.23265), "J/(kmol K)", (200, 320), PERRY),
    "water": ((276370, -2090.1, 8.125, -0.014116, 9.3701e-6), "J/(kmol K)", (273.16, 533), PERRY),
}
# Liquid, the same as cp/R in T/100 K.
LIQUID_OVER_R: dict[str, tuple[tuple[float, ...], tuple[float, float], str]] = {
    "monoethanolamine": ((10.339, 3.20506), (299, 397), ZABRANSKY),
    "diethanolamine": ((29.6248, -5.1321, 1.851), (299, 397), ZABRANSKY),
    "methyldiethanolamine": ((9.87385, 7.47541), (279, 397), ZABRANSKY),
    "triethylene glycol": ((21.8977, 6.78396, -0.230978), (274, 552), ZABRANSKY),
    "propylene carbonate": ((28.6994, -11.1544, 3.77458, -0.337408), (223, 416), ZABRANSKY),
}

# Heat of vaporisation in kJ/mol and its temperature in K, CRC. Gases have none: what they give off when they dissolve
# depends on the solvent. Propane and n-butane have theirs at the normal boiling point, as their saturated vapour at
# 298.15 K is no ideal gas.
VAPORISATION: dict[str, tuple[float, float]] = {
    "propane": (19.04, 231.05),
    "n-butane": (22.44, 272.65),
    "n-pentane": (26.43, 298.15),
    "n-hexane": (31.56, 298.15),
    "cyclohexane": (33.01, 298.15),
    "benzene": (33.83, 298.15),
    "toluene": (38.01, 298.15),
    "ethylbenzene": (42.24, 298.15),
    "o-xylene": (43.43, 298.15),
    "m-xylene": (42.65, 298.15),
    "p-xylene": (42.40, 298.15),
    "methanol": (37.43, 298.15),
    "ethanol": (42.32, 298.15),
    "2-propanol": (45.39, 298.15),
    "acetone": (30.99, 298.15),
    "butanone": (34.79, 298.15),
    "ethyl acetate": (35.60, 298.15),
    "dichloromethane": (28.82, 298.15),
    "water": (43.98, 298.15),
}
