"""Where a result comes from: campaign, inputs, versions, seed, trials, and what to keep in mind."""

from __future__ import annotations

import sys
from importlib.metadata import version
from typing import Any

import numpy as np

from tapband.nouns.campaign import Campaign
from tapband.nouns.version import VERSION
from tapband.questions.statement import statements
from tapband.reduction import Reduced
from tapband.reduction.undeclared import NO_WALL_CORRECTION, NOT_TOTAL_DRAG, undeclared

CAUTIONS = (
    NO_WALL_CORRECTION,
    NOT_TOTAL_DRAG,
    "An interval covers the sources that are declared, and no others.",
    "Loads that safety depends on need the review of a competent person; local rules come first.",
)


def meta(reduced: Reduced) -> dict[str, Any]:
    """What a reduction says of itself, beside its tables."""
    campaign, drawn = reduced.campaign, reduced.montecarlo
    empty = bool(np.any(~np.isfinite(reduced.linear.estimate)))
    return {
        **head(campaign),
        "trials_used": np.max(drawn.trials, axis=-1).tolist()
        if drawn.trials.ndim > 1
        else drawn.trials.tolist(),
        "refused": drawn.refused.tolist(),
        "method": list(drawn.method),
        "corrections": [str(c) for c in reduced.assembled.corrected.made],
        "warnings": list(reduced.warnings),
        "moment_centre": campaign.section.moment_centre + reduced.assembled.corrected.centre,
        "stated": statements(reduced),
        "exit_status": int(empty),
    }


def head(campaign: Campaign) -> dict[str, Any]:
    """What every result says of the campaign it comes from and of the program."""
    names = ("numpy", "scipy", "pandas")
    return {
        "format": 1,
        "kind": "reduce",
        "title": campaign.title,
        "name": campaign.name,
        "level": campaign.intervals.level,
        "same_angle": float(np.degrees(campaign.plan.polar.same_angle)),
        "seed": campaign.intervals.seed,
        "trials": campaign.intervals.trials,
        "versions": {
            "tapband": VERSION,
            "python": sys.version.split()[0],
            **{n: version(n) for n in names},
        },
        "inputs": dict(campaign.inputs),
        "integration": campaign.reduction.integration,
        "compressibility": campaign.reduction.compressibility,
        "reference_mach": campaign.reduction.reference_mach,
        "undeclared": list(undeclared(campaign)),
        "cautions": list(CAUTIONS),
    }
