"""A column for tests that take a whole advice and look at anything but its numbers.

Few layers, growth tolerated that shows soon, and splittings that leave little explicit, so that
little is asked what if: an advice takes some seconds.
"""

import tomllib

TEXT = """\
title = "2 layers of a quick column"
[levels]
kind = "uniform"
layers = 2
top_m = 9000.0
[air]
kind = "isothermal"
temperature_k = 260.0
[horizontal]
grid_spacing_m = 3000.0
[advice]
tableaux = ["ARS(2,3,2)"]
splits = ["sound+buoyancy", "sound+buoyancy+divergence"]
divides_s = [600.0]
efolding_s = 60.0
"""

DEFINITION = tomllib.loads(TEXT)
PAIRS = 2
