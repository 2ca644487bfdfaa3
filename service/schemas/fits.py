"""A fit to observations."""

from __future__ import annotations

from pydantic import Field

from service.schemas.parts import Part


class FittedParameter(Part):
    """A parameter found from observations, with its standard deviation."""

    value: float | None
    sigma: float | None = Field(description="one standard deviation; null where the data leave something open")
    unit: str


class FittedObservations(Part):
    """One list of observations and what was fitted to it; all lists have one entry for each point."""

    of: str
    arc: str = Field("", description="the arc that all of it is of, where the document names one")
    pointer: str
    unit: str
    place: list[float | None]
    observed: list[float | None]
    fitted: list[float | None]
    residual: list[float | None] = Field(description="observed less fitted")
    sigma: list[float | None] | None = Field(description="as given; null where none were")
    normalised: list[float | None] | None = Field(description="residual over sigma, or over the spread")
    fitted_sigma: list[float | None] | None = Field(description="one standard deviation of the fitted value")


class FitDocument(Part):
    """A fit by least squares."""

    points: int
    sigmas_known: bool = Field(description="whether the observations gave their standard deviations")
    sum_of_squares: float | None = Field(description="of the residuals, over sigma where that is known")
    degrees_of_freedom: float | None = Field(description="points less the numbers that were determined from them")
    spread: float | None = Field(description="root of sum of squares over degrees of freedom")
    unit: str = Field(description="of the spread; the sum of squares has its square")
    parameters: dict[str, FittedParameter]
    covariance: list[list[float | None]] | None = Field(description="of the parameters, in their order and units")
    lists: list[FittedObservations]
