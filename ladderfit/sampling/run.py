"""From a ladder to a result."""

from __future__ import annotations

import sys
from collections.abc import Mapping

import numpy as np
import numpy.typing as npt

from ladderfit.diagnostics import TRUSTED_K
from ladderfit.kernels.compiling import WORDS_WHEN_COLD, is_cold, one_blas_thread
from ladderfit.ladder import Ladder
from ladderfit.names import HEADLINE, base_name, parameter
from ladderfit.posterior.determined import check_determined
from ladderfit.posterior.joint import Posterior, posterior
from ladderfit.priors import Fixed, HalfNormal, Prior, Uniform
from ladderfit.result import Diagnostics, Result, ordered
from ladderfit.sampling.direct import DirectDraws, Progress, Target, draw_direct

FloatArray = npt.NDArray[np.float64]

UNINFORMED = 0.9  # posterior over prior variance above which the data add nothing
_AT_BOUND = 0.02  # of a uniform prior's range
_CROWDED = 0.1  # share of draws that near a bound which is worth a word


def draw(
    ladder: Ladder,
    *,
    seed: int | None = None,
    draws: int | None = None,
    progress: Progress | None = None,
) -> Result:
    """Draw the joint posterior of a ladder directly.

    Parameters
    ----------
    ladder : Ladder
    seed, draws : int, optional
        In place of the ladder's own ``sampling.seed`` and ``sampling.draws``.
    progress : callable, optional
        Told the stage, in words, and the fraction done.

    Returns
    -------
    Result

    Raises
    ------
    UndeterminedError
        If the data and the stated priors leave the distance scale undetermined.
    SamplingError
        If the posterior cannot be drawn.
    """
    seed = ladder.choices.sampling.seed if seed is None else seed
    draws = ladder.choices.sampling.draws if draws is None else draws
    with one_blas_thread():
        joint = posterior(ladder)
        check_determined(joint)
        return drawn(joint, target(joint), seed, draws, progress)[0]


def drawn(
    joint: Posterior, aim: Target, seed: int, draws: int, progress: Progress | None = None
) -> tuple[Result, DirectDraws]:
    """Draw an assembled posterior; the draws of phi come along."""
    if is_cold():
        announce_compilation(progress)
    rng = np.random.default_rng(seed)
    with one_blas_thread():
        found = draw_direct(aim, draws, rng, progress)
        theta = found.theta if found.theta is not None else joint.theta(found.z, rng)
        values = ordered(joint.named(found.z, theta))
    diagnostics = _diagnostics(joint, found, values, seed)
    return Result(joint.ladder.choices, values, diagnostics, joint.ladder), found


def announce_compilation(progress: Progress | None) -> None:
    """Say why the first evaluation takes long."""
    if progress is not None:
        progress(WORDS_WHEN_COLD, 0.0)
    else:
        print(f"ladderfit: {WORDS_WHEN_COLD}", file=sys.stderr)


def target(joint: Posterior) -> Target:
    """The posterior as `direct` sees it."""
    phi = joint.split.phi
    return Target(
        joint.log_density,
        np.array([coordinate.start for coordinate in phi]),
        np.array([coordinate.scale for coordinate in phi]),
        np.array([coordinate.kind == "folded" for coordinate in phi], dtype=bool),
        joint.focus,
        with_theta=joint.weighed if joint.theta_is_cheap else None,
    )


def informed(ladder: Ladder, draws: Mapping[str, FloatArray]) -> dict[str, float]:
    """Posterior over prior standard deviation of every free parameter with a prior."""
    ratio = {}
    for name, values in draws.items():
        if base_name(name) not in HEADLINE:  # moduli, and modes of shared errors
            continue
        prior = ladder.choices.prior(name)
        if not isinstance(prior, Fixed):
            ratio[name] = float(np.std(values)) / prior.sd
    return ratio


def prior_notes(ladder: Ladder, draws: Mapping[str, FloatArray]) -> list[str]:
    """Sentences on priors that do the work, and on posteriors pressed against a bound."""
    notes = []
    for name, ratio in informed(ladder, draws).items():
        prior, words = ladder.choices.prior(name), parameter(name).words
        if ratio**2 > UNINFORMED and _centred(prior, draws[name]):
            notes.append(
                f"The data add nothing to the prior of the {words} ({name}): its posterior is "
                f"{100 * ratio:.0f} % as wide as its prior {prior}."
            )
        if isinstance(prior, Uniform):
            edge = _AT_BOUND * (prior.high - prior.low)
            near = draws[name] > prior.high - edge
            if not base_name(name).endswith("outlier_fraction"):  # none at all is no bound
                near |= draws[name] < prior.low + edge
            if np.mean(near) > _CROWDED and ratio**2 <= UNINFORMED:
                notes.append(
                    f"The posterior of the {words} ({name}) presses against a bound of its "
                    f"prior {prior}: widen the prior, or say why the bound holds."
                )
    return notes


def _centred(prior: Prior, values: FloatArray) -> bool:
    """Whether the posterior has also stayed where the prior put it."""
    if isinstance(prior, HalfNormal):
        return True
    return abs(float(np.mean(values)) - prior.centre) < prior.sd


def _diagnostics(
    joint: Posterior, found: DirectDraws, values: Mapping[str, FloatArray], seed: int
) -> Diagnostics:
    notes = list(joint.ladder.notes)
    if found.pareto_k > TRUSTED_K:
        notes.append(
            f"The importance weights are too heavy to trust (Pareto k = {found.pareto_k:.2f}, "
            f"above {TRUSTED_K}): take more draws, or narrow the priors that leave it so wide."
        )
    if len(found.modes) > 1:
        notes.append(
            f"The posterior has {len(found.modes)} separate modes; all are drawn, but a mean "
            "and an error do not describe it: look at the corner figure."
        )
    notes += prior_notes(joint.ladder, values)
    return Diagnostics(
        sampler="direct",
        seed=seed,
        ess=dict.fromkeys(values, found.ess),
        pareto_k=found.pareto_k,
        efficiency=found.efficiency,
        log_evidence=found.log_evidence,
        log_evidence_error=found.log_evidence_error,
        informed=informed(joint.ladder, values),
        notes=tuple(notes),
    )
