"""The basis against what a user would pick instead, on this machine: ratios, and time against size.

Every answer is asserted before it is timed. Contenders run on one thread each and take turns, so that a busy machine
slows both; what counts is the ratio of their medians in the same run.
"""

from perpend.bench.contests import SHORT, compare, conditions
from perpend.bench.sizes import SIZES, across_sizes
from perpend.bench.table import lines, told
from perpend.bench.turns import Comparison

__all__ = ["SHORT", "SIZES", "Comparison", "across_sizes", "compare", "conditions", "lines", "told"]
