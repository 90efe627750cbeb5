"""The invented department: its units, ventilators, rooms and calendar."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import pandas as pd

SITE_ZONE = "Europe/Dublin"
FIRST_DAY = pd.Timestamp("2026-05-01")
TAUGHT_MONTH = 3  # months after the first day: the fourth month
UNITS = ("Alder ICU", "Birch ICU", "Cedar step-down")
ROOMS = {"Alder ICU": (55.0, 6.0), "Birch ICU": (48.0, 12.0)}
ROOMS |= {"Cedar step-down": (70.0, 4.0)}
VENTILATORS_AT_800 = 30
# Parts of the story: when two filters were changed without an entry (share of the
# log), how long those lives were, and how long one ventilator went without a filter.
UNLOGGED_AT, UNLOGGED_LIFE_H = (0.35, 0.7), 192.0
FOULED_BARE_DAYS = 75


@dataclass(frozen=True)
class Places:
    """Ventilators of the department and the parts some of them play in its story."""

    ventilator: np.ndarray  # tokens
    unit: np.ndarray  # of each ventilator
    bias_lpm: np.ndarray  # its default
    begin: pd.Timestamp  # UTC
    end: pd.Timestamp
    taught: pd.Timestamp

    @property
    def fouled(self) -> str:
        """Its expiratory flow reading drifts after many unfiltered treatments."""
        return str(self.ventilator[2])

    @property
    def electronics(self) -> str:
        """It fails for a reason that has nothing to do with aerosol."""
        return str(self.ventilator[len(self.ventilator) // 2])

    @property
    def slow_clock(self) -> str:
        """Its clock runs 24 minutes behind."""
        return str(self.ventilator[4])

    @property
    def summer_clock(self) -> str:
        """Its clock slipped an hour when the summer time ended."""
        return str(self.ventilator[-2])

    @property
    def vasodilator(self) -> str:
        """A patient on it gets continuous prostacyclin."""
        return str(self.ventilator[6])

    @property
    def span_h(self) -> float:
        """Hours from the first to the last moment of the log."""
        return (self.end - self.begin) / pd.Timedelta(hours=1)

    @property
    def story_h(self) -> dict[str, tuple[float, float]]:
        """When each ventilator of the story must have been in use, hours."""
        bare = self.span_h - FOULED_BARE_DAYS * 24.0
        early, later = (share * self.span_h for share in UNLOGGED_AT)
        return {
            self.fouled: (bare, self.span_h),
            self.unlogged[0]: (early - 24, early + UNLOGGED_LIFE_H),
            self.unlogged[1]: (later - 24, later + UNLOGGED_LIFE_H),
        }

    @property
    def unlogged(self) -> tuple[str, str]:
        """Ventilators on which a filter was changed without an entry."""
        return str(self.ventilator[1]), str(self.ventilator[-4])


def utc(local: pd.Timestamp) -> pd.Timestamp:
    """A moment of the site's clock, as the log keeps it."""
    return local.tz_localize(SITE_ZONE).tz_convert("UTC").tz_localize(None)


def places(months: int, treatments_per_month: int, rng: np.random.Generator) -> Places:
    """Enough ventilators for so many treatments, spread over the three units."""
    count = max(10, round(VENTILATORS_AT_800 * treatments_per_month / 800))
    unit = np.array(UNITS, dtype=object)[np.arange(count) * 3 // count]
    token = [f"{name[0]}{n:02d}" for n, name in enumerate(unit, start=1)]
    taught = FIRST_DAY + pd.DateOffset(months=min(TAUGHT_MONTH, months - 1))
    return Places(
        ventilator=np.array(token, dtype=object),
        unit=unit,
        bias_lpm=rng.choice([0.0, 2.0, 2.0, 3.0, 5.0], count),
        begin=utc(FIRST_DAY),
        end=utc(FIRST_DAY + pd.DateOffset(months=months)),
        taught=utc(taught + pd.Timedelta(days=4, hours=14)),
    )


def local_hour(moments: np.ndarray) -> np.ndarray:
    """The hour the site's clock shows, with minutes as a fraction."""
    local = pd.DatetimeIndex(moments).tz_localize("UTC").tz_convert(SITE_ZONE)
    return np.asarray(local.hour + local.minute / 60.0)
