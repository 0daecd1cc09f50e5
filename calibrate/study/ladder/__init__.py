"""The verification ladder: problems with known answers that the installed tool solves again.

Each check sets what the tool computes against a closed form, a plain quadrature or a published figure. Knows the layers
below through what they offer to everyone, and nothing of any particular study.
"""

from calibrate.study.ladder.check import Check, Figures, LadderRow
from calibrate.study.ladder.content import ladder_content
from calibrate.study.ladder.run import CHECKS, run_ladder

__all__ = ["CHECKS", "Check", "Figures", "LadderRow", "ladder_content", "run_ladder"]
