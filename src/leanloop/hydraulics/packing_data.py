"""Numbers of generic random packings: (kind, material, nominal size in mm) to numbers and their source.

A size in inches goes under the size in mm it is usually called by: 1/4 in is 6, 1/2 is 13, 5/8 is 16, 3/4 is 19, 1 is 25, 1 1/2
is 38, 2 is 50, 3 is 76 and 3 1/2 is 90. "Saddle" is the modern shape, not that of Berl. Raschig rings of metal have a wall of
1/16 in.
"""

from __future__ import annotations

NAN = float("nan")

SEEN = "reprint of a 1980 table in R. D. Noble, P. A. Terry, Principles of Chemical Separations 2004, table 6.2; seen"
SINNOTT = "R. K. Sinnott, Chemical Engineering Design, table 11.3; from memory"
KISTER_SET = "packing factors of Kister and Strigle; from memory"
NEIGHBOUR = "the factor of the size of 38 mm, which is the nearest; from memory"
BERL_15 = "older packing factors of Eckert 1970, the same in both sets; from memory"
BILLET = "R. Billet, M. Schultes, Trans. IChemE 77A (1999) 498; from memory"
BILLET_SEEN = "R. Billet, M. Schultes, Trans. IChemE 77A (1999) 498; from memory; a, eps, C_h (of ceramic also C_P) seen"
STICHLMAIR_SOURCE = "J. Stichlmair, J. L. Bravo, J. R. Fair, Gas Sep. Purif. 3 (1989) 19; from memory, doubtful"

# specific area in m2/m3, void fraction
GEOMETRY = {
    ("raschig", "ceramic", 6): ((787.0, 0.73), SEEN),
    ("raschig", "ceramic", 13): ((364.0, 0.63), SEEN),
    ("raschig", "ceramic", 25): ((190.0, 0.73), SEEN),
    ("raschig", "ceramic", 38): ((128.0, NAN), SINNOTT),
    ("raschig", "ceramic", 50): ((92.0, 0.74), SEEN),
    ("raschig", "ceramic", 76): ((69.0, NAN), SINNOTT),
    ("raschig", "metal", 13): ((387.0, 0.73), SEEN),
    ("raschig", "metal", 25): ((187.0, 0.85), SEEN),
    ("raschig", "metal", 50): ((103.0, 0.92), SEEN),
    ("berl", "ceramic", 6): ((899.0, 0.60), SEEN),
    ("berl", "ceramic", 13): ((466.0, 0.63), SEEN),
    ("berl", "ceramic", 25): ((249.0, 0.69), SEEN),
    ("berl", "ceramic", 50): ((105.0, 0.72), SEEN),
    ("pall", "metal", 16): ((341.0, NAN), SINNOTT),
    ("pall", "metal", 25): ((217.5, 0.934), SEEN),
    ("pall", "metal", 38): ((128.0, NAN), SINNOTT),
    ("pall", "metal", 50): ((120.0, 0.94), SEEN),
    ("pall", "metal", 76): ((66.0, NAN), SINNOTT),
    ("pall", "plastic", 16): ((341.0, NAN), SINNOTT),
    ("pall", "plastic", 25): ((207.0, NAN), SINNOTT),
    ("pall", "plastic", 38): ((128.0, NAN), SINNOTT),
    ("pall", "plastic", 50): ((102.0, NAN), SINNOTT),
    ("pall", "plastic", 90): ((85.0, NAN), SINNOTT),
    ("saddle", "ceramic", 13): ((480.0, NAN), SINNOTT),
    ("saddle", "ceramic", 19): ((330.0, NAN), SINNOTT),
    ("saddle", "ceramic", 25): ((253.0, NAN), SINNOTT),
    ("saddle", "ceramic", 38): ((194.0, NAN), SINNOTT),
    ("saddle", "ceramic", 50): ((108.0, NAN), SINNOTT),
}

# 1/ft; those of Sinnott are printed per metre
_FT = 0.3048
OLDER = {
    ("raschig", "ceramic", 6): (1600.0, SEEN),
    ("raschig", "ceramic", 13): (580.0, SEEN),
    ("raschig", "ceramic", 25): (155.0, SEEN),
    ("raschig", "ceramic", 38): (310 * _FT, SINNOTT),
    ("raschig", "ceramic", 50): (65.0, SEEN),
    ("raschig", "ceramic", 76): (120 * _FT, SINNOTT),
    ("raschig", "metal", 13): (410.0, SEEN),
    ("raschig", "metal", 25): (137.0, SEEN),
    ("raschig", "metal", 50): (57.0, SEEN),
    ("berl", "ceramic", 6): (900.0, SEEN),
    ("berl", "ceramic", 13): (240.0, SEEN),
    ("berl", "ceramic", 25): (110.0, SEEN),
    ("berl", "ceramic", 38): (65.0, BERL_15),
    ("berl", "ceramic", 50): (45.0, SEEN),
    ("pall", "metal", 16): (230 * _FT, SINNOTT),
    ("pall", "metal", 25): (48.0, SEEN),
    ("pall", "metal", 38): (92 * _FT, SINNOTT),
    ("pall", "metal", 50): (20.0, SEEN),
    ("pall", "metal", 76): (52 * _FT, SINNOTT),
    ("pall", "plastic", 16): (320 * _FT, SINNOTT),
    ("pall", "plastic", 25): (170 * _FT, SINNOTT),
    ("pall", "plastic", 38): (130 * _FT, SINNOTT),
    ("pall", "plastic", 50): (82 * _FT, SINNOTT),
    ("pall", "plastic", 90): (52 * _FT, SINNOTT),
    ("saddle", "ceramic", 13): (660 * _FT, SINNOTT),
    ("saddle", "ceramic", 19): (475 * _FT, SINNOTT),
    ("saddle", "ceramic", 25): (300 * _FT, SINNOTT),
    ("saddle", "ceramic", 38): (170 * _FT, SINNOTT),
    ("saddle", "ceramic", 50): (130 * _FT, SINNOTT),
    ("saddle", "ceramic", 76): (72 * _FT, SINNOTT),
}

# 1/ft
KISTER = {
    ("pall", "metal", 16): (81.0, KISTER_SET),
    ("pall", "metal", 25): (56.0, KISTER_SET),
    ("pall", "metal", 35): (40.0, NEIGHBOUR),
    ("pall", "metal", 38): (40.0, KISTER_SET),
    ("pall", "metal", 50): (27.0, KISTER_SET),
    ("pall", "metal", 90): (18.0, KISTER_SET),
    ("pall", "plastic", 16): (95.0, KISTER_SET),
    ("pall", "plastic", 25): (55.0, KISTER_SET),
    ("pall", "plastic", 35): (40.0, NEIGHBOUR),
    ("pall", "plastic", 38): (40.0, KISTER_SET),
    ("pall", "plastic", 50): (26.0, KISTER_SET),
    ("pall", "plastic", 90): (17.0, KISTER_SET),
    ("raschig", "ceramic", 25): (179.0, KISTER_SET),
    ("raschig", "ceramic", 35): (93.0, NEIGHBOUR),
    ("raschig", "ceramic", 38): (93.0, KISTER_SET),
    ("raschig", "ceramic", 50): (65.0, KISTER_SET),
    ("raschig", "ceramic", 76): (37.0, KISTER_SET),
    ("saddle", "ceramic", 25): (92.0, KISTER_SET),
    ("saddle", "ceramic", 35): (52.0, NEIGHBOUR),
    ("saddle", "ceramic", 38): (52.0, KISTER_SET),
    ("saddle", "ceramic", 50): (40.0, KISTER_SET),
    ("saddle", "ceramic", 76): (22.0, KISTER_SET),
    ("berl", "ceramic", 13): (240.0, BERL_15),
    ("berl", "ceramic", 25): (110.0, BERL_15),
    ("berl", "ceramic", 35): (65.0, NEIGHBOUR),
    ("berl", "ceramic", 38): (65.0, BERL_15),
    ("berl", "ceramic", 50): (45.0, BERL_15),
}

# specific area, void fraction, C_S, C_Fl, C_h, C_P, C_L, C_V
BILLET_SCHULTES = {
    ("pall", "metal", 50): ((112.6, 0.951, 2.725, 1.580, 0.784, 0.763, 1.192, 0.410), BILLET_SEEN),
    ("pall", "metal", 35): ((139.4, 0.965, 2.629, 1.679, 0.644, 0.967, 1.012, 0.341), BILLET),
    ("pall", "metal", 25): ((223.5, 0.954, 2.627, 2.083, 0.719, 0.957, 1.440, 0.336), BILLET),
    ("pall", "plastic", 50): ((111.1, 0.919, 2.816, 1.757, 0.593, 0.698, 1.239, 0.368), BILLET),
    ("pall", "plastic", 35): ((151.1, 0.906, 2.654, 1.742, 0.718, 0.927, 0.856, 0.380), BILLET),
    ("pall", "plastic", 25): ((225.0, 0.887, 2.696, 2.064, 0.528, 0.865, 0.905, 0.446), BILLET),
    ("raschig", "ceramic", 50): ((95.0, 0.830, 2.482, 1.547, NAN, NAN, 1.416, 0.210), BILLET),
    ("raschig", "ceramic", 25): ((190.0, 0.680, 2.454, 1.899, 0.577, 1.329, 1.361, 0.412), BILLET_SEEN),
    ("berl", "ceramic", 25): ((260.0, 0.680, NAN, NAN, 0.620, NAN, 1.246, 0.387), BILLET),
    ("berl", "ceramic", 13): ((545.0, 0.650, NAN, NAN, 0.833, NAN, 1.364, 0.232), BILLET),
}

# specific area, void fraction, C1, C2, C3
STICHLMAIR = {
    ("raschig", "ceramic", 30): ((137.0, 0.775, 48.0, 8.0, 2.0), STICHLMAIR_SOURCE),
    ("raschig", "ceramic", 35): ((126.0, 0.773, 48.0, 8.0, 2.15), STICHLMAIR_SOURCE),
    ("pall", "metal", 25): ((223.5, 0.954, 0.05, 1.0, 3.0), STICHLMAIR_SOURCE),
    ("pall", "metal", 35): ((139.4, 0.965, 0.1, 1.0, 2.1), STICHLMAIR_SOURCE),
    ("pall", "plastic", 35): ((151.1, 0.906, 0.1, 0.1, 2.1), STICHLMAIR_SOURCE),
    ("berl", "ceramic", 35): ((133.7, 0.75, 33.0, 14.0, 1.0), STICHLMAIR_SOURCE),
    ("saddle", "ceramic", 25): ((183.0, 0.732, 32.0, 7.0, 1.0), STICHLMAIR_SOURCE),
    ("saddle", "ceramic", 35): ((135.0, 0.76, 30.0, 6.0, 1.2), STICHLMAIR_SOURCE),
}
