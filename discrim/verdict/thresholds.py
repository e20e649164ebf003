"""Every threshold that is an opinion. A chemist can dispute a verdict by reading this file."""

from __future__ import annotations

# The stated errors of the conditions must be able to grow by this factor before "participates"
# falls.
ERROR_MARGIN = 1.5
# Where condition errors were only assumed, the conditions must vary on their own by at least this
# fraction (ten times the assumed 1 %) for "participates".
ASSUMED_SPREAD = 0.10
# A sensitivity with less than this fraction outside lockstep is called conditioning, not noise.
CONDITIONING_FRACTION = 0.10
# Combinations of the other constants that the runs do not tell apart: the test allows for one.
MOST_WEAK = 1
# A fraction below this is rounding of the arithmetic.
NOTHING_APART = 1e-9
# Fewer runs than constants plus this are called too few.
FEW_RUNS = 3
# Whether "participates" becomes "undecided" when leaving out one run would change it. False: it is said
# beside the verdict and as a finding, since how often verdicts are wrong already counts such tables.
ONE_RUN_STOPS = False
# Findings about residuals: a trend is called one below this p (all trends of one law together), and
# so are the other patterns, each by itself.
TREND = 0.01
PATTERN = 0.01
# A run further off than chance would throw the farthest of them.
FAR_RUN = 0.01
# Replicates that scatter otherwise than stated: more, or (which costs only power) less.
REPLICATES_MORE = 0.01
REPLICATES_LESS = 0.001
# A run that is fitted whatever it reads: nothing else checks it.
ALONE = 0.99
# Cook's distance above which leaving one run out moves the constants out of the middle of their
# confidence region (common practice: 1).
MOVES_CONSTANTS = 1.0
