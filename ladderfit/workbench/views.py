"""The registry of views: one entry each, in the order in which they are offered.

The first four of `FIRST` that suit a ladder have a button; the others of a rung
stand under "more".
"""

from __future__ import annotations

from ladderfit.ladder import Ladder
from ladderfit.workbench import view_tables as tables
from ladderfit.workbench import works
from ladderfit.workbench.canvas import hubble, panels, parallaxes
from ladderfit.workbench.canvas.corner import CornerView
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
    "anchors": ("relation", "parallaxes", "moduli", "corner"),
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
