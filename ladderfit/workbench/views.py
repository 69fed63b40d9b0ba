"""The registry of views: one entry each, in the order in which they are offered.

The first four of `FIRST` that suit a ladder have a button; the others of a rung
stand under "more".
"""

from __future__ import annotations

from ladderfit.anchors import anchor_names
from ladderfit.checks.peak_views import VIEWS as TERMS_SEEN
from ladderfit.ladder import Ladder
from ladderfit.posterior.families import CEPHEIDS, PARALLAXES, outliers_of
from ladderfit.workbench import trial_tables, works
from ladderfit.workbench import view_tables as tables
from ladderfit.workbench.canvas import checks, hubble, panels, parallaxes, trials
from ladderfit.workbench.canvas.corner import CornerView
from ladderfit.workbench.canvas.outliers import outliers
from ladderfit.workbench.canvas.published import published
from ladderfit.workbench.canvas.relation import RelationView
from ladderfit.workbench.canvas.view import View
from ladderfit.workbench.columns import numeric_columns

MOST = 4
STARS, PEAKS = ("anchors", "cepheids"), ("supernovae", "expansion")
EVERY = (*STARS, *PEAKS)


def _has_stars(ladder: Ladder, _: str) -> bool:
    choices = ladder.choices
    return choices.cepheids is not None or choices.anchors.parallaxes is not None


def _has_parallaxes(ladder: Ladder, _: str) -> bool:
    return ladder.parallax_stars is not None and len(ladder.parallax_stars) > 0


def _has_peaks(ladder: Ladder, _: str) -> bool:
    expansion = ladder.choices.expansion
    objects = expansion is not None and expansion.table is not None
    return ladder.choices.supernovae is not None or objects


def _has_terms(ladder: Ladder, _: str) -> bool:
    relation = ladder.choices.peak_relation
    return any(getattr(relation, name) != "none" for name in TERMS_SEEN)


def _has_flow(ladder: Ladder, _: str) -> bool:
    return ladder.flow is not None


VIEWS: tuple[View, ...] = (
    View(
        "relation",
        "Relation",
        "The relation with its residuals",
        STARS,
        _has_stars,
        tables.relation,
        artists=RelationView,
    ),
    View(
        "column",
        "Residuals",
        "Residuals against any column of the table",
        EVERY,
        lambda ladder, rung: bool(numeric_columns(ladder, rung)),
        tables.column,
        draw=panels.column,
    ),
    View(
        "moduli",
        "Moduli",
        "Distance moduli of the hosts",
        (*STARS, "supernovae"),
        lambda ladder, _: bool(ladder.hosts),
        tables.moduli,
        draw=panels.moduli,
    ),
    View(
        "parallaxes",
        "Parallaxes",
        "Measured against photometric parallax; zero point and offset jointly",
        ("anchors",),
        _has_parallaxes,
        tables.parallaxes,
        draw=parallaxes.parallaxes,
    ),
    View(
        "priors",
        "Distance priors",
        "Zero point and offset along the distance priors of the parallax stars",
        ("anchors",),
        _has_parallaxes,
        tables.priors,
        draw=parallaxes.priors,
        work=works.distance_priors,
        doing="fitting under each distance prior",
    ),
    View(
        "hubble",
        "Hubble",
        "The Hubble diagram with residuals and their running mean",
        PEAKS,
        _has_peaks,
        tables.hubble,
        draw=hubble.hubble,
    ),
    View(
        "cuts",
        "Cuts",
        "The Hubble constant along the lower and the upper redshift cut",
        PEAKS,
        _has_flow,
        tables.cuts,
        draw=hubble.cuts,
        work=works.redshift_cuts,
        doing="fitting with other redshift cuts",
    ),
    View(
        "anchors",
        "Anchors",
        "Each anchor alone and left out, and how far it is from the others",
        ("anchors",),
        lambda ladder, _: len(anchor_names(ladder)) > 1,
        trial_tables.anchors,
        draw=trials.anchors,
        work=works.anchors,
        doing="fitting with each anchor alone and without it",
    ),
    View(
        "influence",
        "Influence",
        "What moves the numbers most when it is left out",
        EVERY,
        lambda ladder, rung: True,
        trial_tables.influence,
        draw=trials.influence,
        work=works.influence,
        doing="leaving out every object in turn",
    ),
    View(
        "sensitivity",
        "Priors",
        "What each number owes to its priors and to the data",
        EVERY,
        lambda ladder, rung: True,
        trial_tables.sensitivity,
        draw=trials.sensitivity,
        work=works.sensitivity,
        doing="raising priors and data to a power",
    ),
    View(
        "alternatives",
        "Alternatives",
        "The alternatives of the ladder file to the choices in force",
        EVERY,
        lambda ladder, rung: bool(ladder.choices.alternatives),
        trial_tables.alternatives,
        draw=trials.alternatives,
        work=works.alternatives,
        doing="fitting one alternative after another",
    ),
    View(
        "checks",
        "Checks",
        "Predictive checks of what the model leaves over, and outliers",
        EVERY,
        lambda ladder, rung: True,
        trial_tables.checks,
        draw=checks.checks,
        work=works.checks,
        doing="checking against replications",
    ),
    View(
        "outliers",
        "Outliers",
        "Stars by how likely they are outliers, or by their weight in the fit",
        STARS,
        lambda ladder, _: any(outliers_of(ladder.choices, key) for key in (CEPHEIDS, PARALLAXES)),
        trial_tables.outliers,
        draw=outliers,
        work=works.outliers,
        doing="looking what each star is taken for",
    ),
    View(
        "peaks",
        "Peak terms",
        "Peaks against width, decline rate, colour and host mass",
        PEAKS,
        _has_terms,
        trial_tables.peaks,
        draw=checks.peaks,
    ),
    View(
        "published",
        "Published",
        "Published values, and the claims of a claims file, beside the posterior",
        EVERY,
        lambda ladder, rung: True,
        trial_tables.published,
        draw=published,
    ),
    View(
        "corner",
        "Corner",
        "The joint posterior",
        EVERY,
        lambda ladder, rung: True,
        tables.corner,
        artists=CornerView,
    ),
)

FIRST = {
    "anchors": ("relation", "parallaxes", "anchors", "corner", "moduli"),
    "cepheids": ("relation", "column", "moduli", "corner"),
    "supernovae": ("hubble", "moduli", "column", "corner"),
    "expansion": ("hubble", "cuts", "column", "corner"),
}
BY_KEY = {view.key: view for view in VIEWS}


def offered(ladder: Ladder, rung: str) -> tuple[list[str], list[str]]:
    """Views of a rung that its data allow: those with a button, and those under "more"."""
    found = [view.key for view in VIEWS if rung in view.rungs and view.suits(ladder, rung)]
    first = [key for key in FIRST[rung] if key in found][:MOST]
    return first, [key for key in found if key not in first]
