"""Check values of column constructions, derived for this project (methods.md 16).

Marked [N] there: derived and checked against a brute-force particle model; no printed
source gives numbers for these constructions. Printed to the digits shown. The fault is
z = det + (z0 - det) exp(-(x - x0)/L), L = (z0 - det)/tan(dip0), straight above its
start (x0, z0).
"""

#: Dip 60 at (0, 0), detachment -4000, level regional -500, oblique heave 900:
#: shear angle -> (heave, throw). Three decimals.
EXPONENTIAL_CUTOFFS = {
    -15.0: (1304.798, 1510.728),
    0.0: (900.0, 1129.617),
    20.0: (605.988, 807.790),
    30.0: (503.885, 686.092),
    45.0: (375.181, 524.819),
}
#: Same fault, any angle: area between regional and bed with the fault gap, 900 x 3500.
EXPONENTIAL_AREA = 3.15e6

#: Dip 60 above, 30 below a bend, level regional: shear angle -> dip of the bed panel
#: between the two axial surfaces (eq. 9), degrees, four decimals.
KINK_PANEL_60_30 = {
    -15.0: 82.9113,
    0.0: 49.1066,
    20.0: 25.7560,
    30.0: 19.1066,
    45.0: 11.9325,
}
#: Same bend: slip on the lower over slip on the upper piece (eq. 10), six decimals.
KINK_SLIP_60_30 = {
    -15.0: 0.366025,
    0.0: 0.577350,
    20.0: 0.777862,
    30.0: 0.866025,
    45.0: 1.000000,
}

#: Constant slip of 1000 on the same exponential fault: heave, throw, far heave, area.
CONSTANT_SLIP = (599.583, 800.313, 1000.0, 2.90758e6)
#: Constant bed length, exponential 45 to -4000, regional 0, heave 700: far heave, area
#: (area to 3e-4).
CONSTANT_BED_LENGTH = (673.15, 2.7254e6)

#: True dip 60, section 35 degrees off the dip direction: apparent dip ("computed").
APPARENT_DIP = (60.0, 35.0, 54.823)
