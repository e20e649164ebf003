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
# Combinations of the other constants that the runs do not tell apart: the test allows for three.
MOST_WEAK = 3
# A fraction below this is rounding of the arithmetic.
NOTHING_APART = 1e-9
# Fewer runs than constants plus this are called too few.
FEW_RUNS = 3
# Whether "participates" becomes "undecided" when leaving out one run would change it. False: it is said
# beside the verdict and as a finding, since how often verdicts are wrong already counts such tables.
ONE_RUN_STOPS = False
# Two terms move in lockstep when their ratio varies by less than this multiple of its own error, or by
# less than this fraction whatever the errors are said to be, but never when it varies by more than the
# last: errors that large say that the ratio crosses zero.
LOCKSTEP_ERRORS = 3.0
LOCKSTEP_RELATIVE = 0.01
LOCKSTEP_MOST = 0.20
# Rivals that stand and whose predictions differ by less than this many standard deviations in every run
# are inseparable.
INSEPARABLE = 1.0
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
# Findings from the chemistry (common practice, no source): a catalyst above this share of what it
# binds takes up a part of it that counts;
CATALYST_SHARE = 0.10
# a reaction this far on its way to equilibrium (Q/K) needs its reverse in the law;
NEAR_EQUILIBRIUM = 0.10
# a lowest amount above this fraction of the highest leaves a rate without the species extrapolated;
FAR_FROM_ZERO = 0.20
# a rate below this fraction of the median has next to no error if its error is relative only;
NEXT_TO_NOTHING = 0.01
# a range of a column above this many of its errors varies;
VARIES = 3.0
# a pH over less than this range is kept;
KEPT_PH = 0.1
# an activation energy to judge by what a temperature that varies can do (J/mol).
TYPICAL_ACTIVATION = 50e3
