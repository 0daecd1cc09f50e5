"""The study: a study file becomes a validated ``Study``, a ``Study`` becomes a ``Result``.

Owns the study file's structure and messages, the run of the whole chain, and
the result files.  The only room that sees every layer below.
"""

from calibrate.study.model import Study
from calibrate.study.paths import default_output
from calibrate.study.reading import read_study
from calibrate.study.result import Result
from calibrate.study.run import run
from calibrate.study.summary import check_summary

__all__ = ["Result", "Study", "check_summary", "default_output", "read_study", "run"]
