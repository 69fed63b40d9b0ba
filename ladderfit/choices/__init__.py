"""Every choice of a calibration, frozen, with its default and its dotted key.

The dataclasses of this package are the ladder file: section by section, key by
key.  A field's words appear in messages.  `Choices` is the whole; it is made from
a nested mapping, given back as one, changed by dotted keys and compared.
"""

from ladderfit.choices.anchors import (
    LARGEST_MODULUS,
    Anchors,
    GeometricAnchor,
    Hosts,
    SharedError,
)
from ladderfit.choices.columns import Columns, Range, SetAside
from ladderfit.choices.covariance import Covariance
from ladderfit.choices.outliers import Outliers
from ladderfit.choices.parallaxes import (
    Cluster,
    Correlation,
    Density,
    Disc,
    DistancePrior,
    Parallaxes,
    Selection,
)
from ladderfit.choices.peak_relation import DeclineRate, HostMass, PeakInput, PeakRelation
from ladderfit.choices.photometry import Completeness, Reddening, SharedTerm
from ladderfit.choices.relation import Group, Metallicity, Relation
from ladderfit.choices.sampling import Sampling
from ladderfit.choices.stars import Cepheids, Magnitude, Overtones, PeriodRatio, Wesenheit
from ladderfit.choices.third_rung import Cosmology, Expansion, Intercept, Supernovae
from ladderfit.choices.whole import Choices

__all__ = [
    "LARGEST_MODULUS",
    "Anchors",
    "Cepheids",
    "Choices",
    "Cluster",
    "Columns",
    "Completeness",
    "Cosmology",
    "Covariance",
    "Correlation",
    "DeclineRate",
    "Density",
    "Disc",
    "DistancePrior",
    "Expansion",
    "GeometricAnchor",
    "Group",
    "HostMass",
    "Hosts",
    "Intercept",
    "Magnitude",
    "Metallicity",
    "Outliers",
    "Overtones",
    "Parallaxes",
    "PeakInput",
    "PeakRelation",
    "PeriodRatio",
    "Range",
    "Reddening",
    "Relation",
    "Sampling",
    "Selection",
    "SetAside",
    "SharedError",
    "SharedTerm",
    "Supernovae",
    "Wesenheit",
]
