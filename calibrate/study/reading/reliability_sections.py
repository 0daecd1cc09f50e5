"""Structure of the sections on dependence, verification and systems."""

from __future__ import annotations

from typing import Annotated, Literal

from pydantic import BeforeValidator, Field

from calibrate.study.reading.schema import Positive, Section, Text, as_list


class CorrelationTable(Section):
    """A pair of ``[correlations]`` written as a table."""

    coefficient: Annotated[float | None, Field(ge=-1, le=1)] = None
    kind: Literal["product-moment", "rank"] = "product-moment"
    from_records: bool = False
    source: str = ""


class VerificationSection(Section):
    """``[verification]``."""

    method: Text = "importance sampling"
    cov: Annotated[float, Field(ge=0.001, le=0.5)] = 0.02
    on: Annotated[list[Literal["present", "optimal", "proposed"]], BeforeValidator(as_list)] = Field(
        default=["proposed"]
    )
    situations: Literal["chosen", "all"] | None = None
    samples: Annotated[int, Field(ge=1000, le=100_000_000)] = 200_000
    points: Literal["random", "sobol"] = "random"
    tolerance: Positive = 0.1


class SystemTable(Section):
    """``[systems.NAME]``."""

    fails_when: Text
    weight: Annotated[float, Field(ge=0)] = 0.0
    description: str = ""
