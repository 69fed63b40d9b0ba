"""The sample's second ladder, whose peaks are not standardised: widths, colours and more.

It shares the galaxies, Cepheids and anchors of the sample; its supernovae are others.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from ladderfit.mock.light_curves import LightCurves
from ladderfit.mock.peaks import flow_supernovae, host_supernovae
from ladderfit.mock.plan import Plan
from ladderfit.mock.tables import ecsv, truth_toml

TRIPP_SEED = 20262  # chosen before the first fit, and never since

_START = """\
# The Stepstone survey of the Ennick Observatory, supernovae as they were measured: peaks
# are not standardised, but come with the width and the colour of each light curve.
# Surveys and galaxies are invented, the data are simulated.  What is true is in
# tripp_truth.toml.
title = "Sample ladder with widths and colours"
"""

_LIGHT = """\
width = "w", width_error = "e_w", colour = "c", colour_error = "e_c", \
peak_width_covariance = "cov_mw", peak_colour_covariance = "cov_mc", \
width_colour_covariance = "cov_wc", host_mass = "logM", survey = "Survey"}"""

_RELATION = """\
[peak_relation]                    # one for all supernovae
width     = {reference = 0.0}      # alpha; the peak magnitude is stated here
colour    = {reference = 0.0}      # beta
host_mass = {step = 10.0}          # log10 of the stellar mass; smoothing = 0.2 for a smooth step
surveys   = ["Marl", "Sedge"]      # those with an offset, against Ennick
errors    = "population"           # in the variance, ignored: for comparing only

"""


def tripp_plan(plan: Plan) -> Plan:
    """The sample's plan with light curves."""
    return replace(plan, light_curves=LightCurves())


def tripp_files(plan: Plan, sample: str) -> dict[str, str]:
    """Files of the second ladder by name, as text.

    Parameters
    ----------
    plan : Plan
        That of the sample.
    sample : str
        The sample's ladder file.
    """
    seen = tripp_plan(plan)
    near, far = np.random.default_rng(TRIPP_SEED).spawn(2)
    remark = "To make the sample again: python -m ladderfit.mock FOLDER"
    return {
        "tripp.toml": _ladder_text(sample),
        "tripp_supernovae.ecsv": ecsv(host_supernovae(seen, near)),
        "tripp_flow.ecsv": ecsv(flow_supernovae(seen, far)),
        "tripp_truth.toml": truth_toml(seen.truth(), TRIPP_SEED, remark),
    }


def _ladder_text(sample: str) -> str:
    """The sample's ladder file with other supernovae, and the terms that these need."""
    body = sample[sample.index("\n[cepheids]") :]
    body = body.replace('"supernovae.ecsv"', '"tripp_supernovae.ecsv"')
    body = body.replace('"flow.ecsv"', '"tripp_flow.ecsv"')
    body = body.replace('peak_error = "e_mB"}', 'peak_error = "e_mB", ' + _LIGHT)
    body = body.replace("[expansion]", _RELATION + "[expansion]")
    return _START + body[: body.index("[alternatives]")] + _ALTERNATIVES


_ALTERNATIVES = """\
[alternatives]                     # keys are those of this file
"peak_relation.errors"    = ["in the variance", "ignored"]
"peak_relation.host_mass" = ["none"]
"peak_relation.surveys"   = [[]]
"supernovae.scatter"      = ["apart"]
"expansion.redshifts"     = [[0.03, 0.15], [0.023, 0.1]]
"""
