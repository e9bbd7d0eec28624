"""Controller and plant as fields of a document: which of the kinds is meant is said by one field of it."""

from __future__ import annotations

from typing import Annotated

from pydantic import Field

from service.analysis.controller import Controller
from service.analysis.plant import PlantModel

ControllerField = Annotated[Controller, Field(discriminator="form")]
PlantModelField = Annotated[PlantModel, Field(discriminator="kind")]
