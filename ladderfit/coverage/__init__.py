"""Whether a ladder's errors mean what they say: its mocks fitted many times, truths ranked."""

from ladderfit.coverage.design import Design, design_of
from ladderfit.coverage.experiment import Experiment, Setup, run_coverage
from ladderfit.coverage.ranks import band, simultaneous_p

__all__ = ["Design", "Experiment", "Setup", "band", "design_of", "run_coverage", "simultaneous_p"]
