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
