"""Groshong, R. H., 2006. 3-D Structural Geology, 2nd ed., Springer, chapter 8.

Read off a stored public page (methods.md sections 15 and 16); printed to the digits
shown. Eq. 8.3: tan(dip) = throw/heave.
"""

#: Normal fault of Fig. 8.3: throw, heave in metres, and the dip that eq. 8.3 gives.
FIG_8_3 = {"throw": 32.0, "heave": 25.6, "dip": 51.34}
#: Reverse fault of Fig. 8.4: throw and heave in metres. The book counts the heave of
#: an overlap positive; here reverse separation has a negative heave.
FIG_8_4 = {"throw": 3.6, "heave": 34.0}
