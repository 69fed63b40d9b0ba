"""What treatments of outliers need of the other choices."""

from __future__ import annotations

from collections.abc import Collection, Iterator, Mapping

from ladderfit import schema
from ladderfit.choices.outliers import CLIPPING, MIXTURE, STUDENT
from ladderfit.choices.parallaxes import Parallaxes
from ladderfit.choices.relation import Relation
from ladderfit.choices.stars import Cepheids
from ladderfit.errors import Problem, nearest
from ladderfit.names import base_name
from ladderfit.priors import Fixed, Prior

POSITIVE = ("outlier_width", "parallax_outlier_width", "degrees_of_freedom")
_FRACTIONS = ("outlier_fraction", "parallax_outlier_fraction")


def fraction_faults(priors: Mapping[str, Prior]) -> Iterator[Problem]:
    """Priors of fractions that reach beyond 0 and 1."""
    for name, prior in priors.items():
        if base_name(name) in _FRACTIONS:
            low, high = (prior.centre,) * 2 if isinstance(prior, Fixed) else prior.bounds
            if low < 0.0 or high > 1.0:
                yield Problem(
                    found=str(prior),
                    expected="a prior between 0 and 1",
                    remedy="write {uniform = [0.0, 0.5]}, say",
                    key=schema.join("priors", name),
                )


def outlier_faults(
    relation: Relation,
    cepheids: Cepheids | None,
    stars: Parallaxes | None,
    groups: Collection[str],
    *,
    covariances: Mapping[str, bool],
) -> Iterator[Problem]:
    """Groups that nobody defines, and what a treatment does not go with.

    `covariances` says by key which covariances are in force that tie hosts together.
    """
    sections = {"cepheids": cepheids, "anchors.parallaxes": stars}
    for key, section in sections.items():
        for group in () if section is None else section.outliers.groups:
            if group not in groups:
                yield Problem(
                    found=f"the group {group!r}, which [groups] does not define",
                    expected="names of groups",
                    remedy=nearest(group, groups),
                    key=f"{key}.outliers.groups",
                )
    if stars is not None:
        yield from _parallax_faults(stars)
    if cepheids is not None and cepheids.outliers.robust:
        yield from _host_faults(relation, cepheids, covariances)


def _parallax_faults(stars: Parallaxes) -> Iterator[Problem]:
    """A mixture is all that parallax stars can have, and where each has its own modulus."""
    treatment, key = stars.outliers.treatment, "anchors.parallaxes.outliers.treatment"
    reasons = {
        CLIPPING: "which would need distances from parallaxes",
        STUDENT: "whose tail a prior that grows with the volume makes infinite",
    }
    if treatment in reasons:
        yield Problem(
            found=f"{treatment!r} for parallax stars, {reasons[treatment]}",
            expected=f"'none' or {MIXTURE!r}",
            remedy=f'write treatment = "{MIXTURE}"',
            key=key,
        )
    elif treatment == MIXTURE and "cluster" in stars.columns:
        yield Problem(
            found="a mixture for parallax stars of which some share a modulus",
            expected="one modulus for each star",
            remedy='take columns.cluster out, or write treatment = "none"',
            key=key,
        )


def _host_faults(
    relation: Relation, cepheids: Cepheids, covariances: Mapping[str, bool]
) -> Iterator[Problem]:
    """A host's stars are integrated over one modulus: what else ties them is refused."""
    metallicity = relation.metallicity
    populations = metallicity != "none" and metallicity.errors == "population"
    others = {
        "relation.reddening": relation.reddening != "fixed",
        "cepheids.shared": bool(cepheids.shared),
        "cepheids.completeness": cepheids.completeness is not None,
        "relation.metallicity.errors": populations and "metallicity_error" in cepheids.columns,
        **covariances,
    }
    for key, present in others.items():
        if present:
            yield Problem(
                found=f"a treatment of outliers together with {key}",
                expected="one of the two: outliers are integrated over one modulus per host",
                remedy=_REMEDIES.get(key, f'take {key} out, or write treatment = "none"'),
                key="cepheids.outliers.treatment",
            )


_REMEDIES = {
    "relation.reddening": 'write relation.reddening = "fixed", or treatment = "none"',
    "relation.metallicity.errors": 'write errors = "in the variance", or treatment = "none"',
}
