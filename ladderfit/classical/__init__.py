"""What older papers did, for comparison only.

Least squares with and without weights, iterative clipping, straight lines with
errors in both coordinates or with outliers, Lutz-Kelker corrections, and the
astrometry-based luminosity.  Each estimates a few numbers from one table; none
propagates what the joint posterior does.  No fit of a ladder uses anything of this
package, unless its file asks for Cepheids to be clipped as in older papers.
"""

from ladderfit.classical.least_squares import (
    Clipped,
    LeastSquares,
    clipped_least_squares,
    line_design,
    ordinary_least_squares,
    weighted_least_squares,
)
from ladderfit.classical.lines import (
    Line,
    LineWithOutliers,
    line_with_both_errors,
    line_with_outliers,
)
from ladderfit.classical.parallaxes import (
    Luminosity,
    ZeroPointEstimate,
    astrometric_luminosity,
    lutz_kelker,
    scaled_correction,
    zero_point_by_luminosity,
)

__all__ = [
    "Clipped",
    "LeastSquares",
    "clipped_least_squares",
    "line_design",
    "ordinary_least_squares",
    "weighted_least_squares",
    "Line",
    "LineWithOutliers",
    "line_with_both_errors",
    "line_with_outliers",
    "Luminosity",
    "ZeroPointEstimate",
    "astrometric_luminosity",
    "lutz_kelker",
    "scaled_correction",
    "zero_point_by_luminosity",
]
