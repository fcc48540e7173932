"""Measure whether an integrator for stochastic differential equations converges as it claims.

The public door: everything a scheme, a problem or a study needs is imported from here.
"""

from sdebench.advise import Advice, advise
from sdebench.compare import Comparison, compare
from sdebench.coordinate import Coordinate
from sdebench.discovery import find_problem as problem
from sdebench.errors import BenchFault, SdebenchError
from sdebench.evidence import Evidence, load, schema
from sdebench.functional import Functional
from sdebench.integrator import Claim, Scheme, scheme
from sdebench.ladder import Ladder
from sdebench.problem import NormalLaw, Parameter, Params, Problem
from sdebench.program import program
from sdebench.sde import SDE, Array
from sdebench.shared_library import library
from sdebench.study import measure
from sdebench.verdict import Verdict
from sdebench.whole_path import whole_path
from sdebench.wiener import Noise, StepLaw, concatenate

__all__ = [
    "SDE",
    "Advice",
    "Array",
    "BenchFault",
    "Claim",
    "Comparison",
    "Coordinate",
    "Evidence",
    "Functional",
    "Ladder",
    "Noise",
    "NormalLaw",
    "Parameter",
    "Params",
    "Problem",
    "Scheme",
    "SdebenchError",
    "StepLaw",
    "Verdict",
    "advise",
    "compare",
    "concatenate",
    "library",
    "load",
    "measure",
    "problem",
    "program",
    "schema",
    "scheme",
    "whole_path",
]
