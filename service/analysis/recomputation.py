"""The one door of the mathematics: a plant and a controller in, everything that is computed of them out."""

from __future__ import annotations

from service.analysis.controller import Controller
from service.analysis.plant import PlantModel, Ranges
from service.analysis.results import Recomputation


def recompute(
    plant_model: PlantModel,
    controller: Controller,
    *,
    ranges: Ranges | None = None,
    settling_band_percent: float = 2.0,
    with_curves: bool = False,
    with_second_opinion: bool = False,
) -> Recomputation:
    """Recompute stability, margins, step metrics and noise of one loop.

    Raises FieldError, its path starting with "plant_model", "controller" or "ranges", where the loop cannot be
    formed: ranges missing for engineering units, an ill-posed loop, a plant kind that is not analysed.
    """
    raise NotImplementedError
