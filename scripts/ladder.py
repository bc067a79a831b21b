"""The step of a predicted ladder that a measured constant belongs to.

A step is named by the net charge of its protonated form, fixed charges apart: BH+ 1, HA 0. That says which constant is
meant whatever group gives or takes the proton, and whatever a compilation calls it.
"""

from __future__ import annotations

from basirank.equilibrium import Step
from basirank.prediction import Prediction


def along_ladder(prediction: Prediction, acid_charge: int) -> Step | None:
    """Step whose protonated form carries that charge (fixed charges apart); None where there is none."""
    assert prediction.equilibrium is not None
    acids = sum(estimate.site.kind == "acid" for estimate in prediction.estimates)
    steps = sorted(prediction.equilibrium.steps, key=lambda step: -step.value)
    index = acids + acid_charge - 1
    return steps[index] if 0 <= index < len(steps) else None
