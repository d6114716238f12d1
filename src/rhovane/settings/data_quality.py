"""Settings of data notes and of own quality checks."""

from __future__ import annotations

from typing import Literal, Self

from pydantic import Field, model_validator

from rhovane.settings.section import Section


class DataNoteSettings(Section):
    """When something is wrong enough with the data themselves to be noted; a data note is never an alert."""

    gap_hours: int = Field(
        36, ge=2, le=720, description="Hours; a series without observation for longer is noted."
    )
    stuck_hours: int = Field(
        24, ge=3, le=336, description="Hours; a series that repeats one value for this long is noted."
    )
    dry_hours: int = Field(
        12, ge=3, le=200, description="Wet hours at neighbours after which a gauge that reads zero is noted."
    )
    step_strength: float = Field(
        2.5, ge=1.5, le=20, description="Least step in level, in spreads of the days on either side."
    )
    split_at: Literal["unit switch", "every step", "never"] = Field(
        "unit switch", description="Steps in level at which windows are split."
    )


class CheckSettings(Section):
    """Own quality checks of one series, or of every series of a quantity; what is left out is not checked."""

    applies_to: str = Field(min_length=1, description="A series key, or a quantity for all series of it.")
    low: float | None = Field(None, description="Below it a reading fails; unit of the series.")
    high: float | None = Field(None, description="Above it a reading fails.")
    suspect_low: float | None = Field(None, description="Below it a reading is suspect.")
    suspect_high: float | None = Field(None, description="Above it a reading is suspect.")
    spike_suspect: float | None = Field(None, gt=0, description="Distance from the mean of both neighbours.")
    spike_fail: float | None = Field(None, gt=0, description="The same, for fail.")
    rate_suspect: float | None = Field(None, gt=0, description="Change from the hour before.")
    rate_fail: float | None = Field(None, gt=0, description="The same, for fail.")
    flat_suspect_hours: int | None = Field(None, ge=2, le=720, description="Hours on one value.")
    flat_fail_hours: int | None = Field(None, ge=2, le=720, description="The same, for fail.")
    flat_resolution: float = Field(0.0, ge=0, description="Values this near each other are one value.")
    climatology_suspect: float | None = Field(
        None,
        gt=0,
        description="Robust standard deviations from the hour's usual value of the 60 days before.",
    )
    climatology_fail: float | None = Field(None, gt=0, description="The same, for fail.")
    neighbour: str = Field("", description="Key of a series of the same quantity to compare with.")
    neighbour_suspect: float | None = Field(
        None, gt=0, description="Robust standard deviations from the usual difference of the 28 days before."
    )
    neighbour_fail: float | None = Field(None, gt=0, description="The same, for fail.")

    @model_validator(mode="after")
    def _limits_fit(self) -> Self:
        for low, high in (("low", "high"), ("suspect_low", "suspect_high")):
            below, above = getattr(self, low), getattr(self, high)
            if below is not None and above is not None and below >= above:
                raise ValueError(f"{low} = {below:g} is not below {high} = {above:g}")
        if bool(self.neighbour) != (self.neighbour_suspect is not None or self.neighbour_fail is not None):
            raise ValueError("neighbour and neighbour_suspect or neighbour_fail belong together")
        return self

    def mistakes(self, where: str, quantity_of: dict[str, str]) -> list[tuple[str, str]]:
        """What does not fit the network's series, as (key, what is wrong and what to do)."""
        found: list[tuple[str, str]] = []
        known = {*quantity_of, *quantity_of.values()}
        if self.applies_to not in known:
            found.append(
                (f"{where}.applies_to", f"{self.applies_to!r} is neither a series nor the quantity of one")
            )
        if self.neighbour and self.neighbour not in quantity_of:
            found.append((f"{where}.neighbour", f"series {self.neighbour!r} is not defined"))
        return found
