"""Where marching ends and full matrices begin, and how widely steps are looked at."""

ASKED = 4
"""Waves of a group whose frozen layers are asked where to look."""

STRIDE, STRIDE_STIFF = 4, 24
"""Steps of the scan from one look of a group to the next, and where slow terms are short."""

SHORT, NOT_SMALL = 0.3, 0.15
"""Step times rate up to which a term is short in one step."""

CERTAIN_UNKNOWNS = 250
"""Up to so many unknowns full matrices are asked about every wave at the answer."""

LADDER_UNKNOWNS, DENSE_UNKNOWNS = 120, 1300
"""The same about every wave at steps below the answer too; and about the binding wave alone."""

DOUBTFUL = 0.5
"""Share of the tolerated rate from which growth of a wave that is not quiet is looked into."""

SLOW_STRIDE = 1.8
"""Factor between steps that are asked about slow growth."""

CLOSE, MOST_SHORTER = 4000, 3
"""Steps that bear out a limit, and how often it is shortened where they do not."""

LONG_MARCH = 20000
"""Steps of the longest march that costs less than full matrices of every wave do."""

FILL = 2.0
"""How far below the limit, as a factor, the binding wave is looked at closely."""

TOGETHER = 16
"""Waves that march together where they may all look at the same step."""

RANKED = 1.004
"""How closely the limits of waves that do not bind are told apart, as a factor."""

MOST_LONGER, MOST_HALVINGS = 24, 6
"""How often longer waves are added, and how often the spacing is halved."""
