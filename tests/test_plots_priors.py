"""The figure of zero point and offset along the distance priors."""

from __future__ import annotations

from small_ladders import SMALL, small_ladder

from ladderfit.plots.parallax import distance_prior_figure
from ladderfit.sensitivity.distance_priors import along_distance_priors, comparison


def test_every_prior_has_its_row_and_both_numbers_their_panel() -> None:
    name = next(n for n in SMALL if small_ladder(n).parallax_stars is not None)
    results = along_distance_priors(small_ladder(name), seed=1, draws=500)
    assert len(results) > 2
    axes = distance_prior_figure(results).axes
    for panel, title in zip(axes, ("Zero point", "Residual offset"), strict=True):
        assert panel.get_xlabel().startswith(title)
    written = {label.get_text() for panel in axes for label in panel.get_yticklabels()}
    assert set(comparison(results).index) <= written
    low, high = sorted(axes[0].get_xlim())
    assert all(low < result.mean("zero_point") < high for result in results.values())
