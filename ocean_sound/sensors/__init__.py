"""Sensors in the water: what they hear, what they miss, and where the best few places for them are."""

from .area import Area
from .choosing import SiteChoice, choose_sites
from .coverage import Hearing, Noise, Target, detection_ranges, losses_at
from .dilution import dilution_map
from .hearing import Reach, Receiver, detection_probability, detection_range, signal_excess
from .locating import locate
from .losses import Losses, LossSettings, compute_losses
from .noise import NoiseSpectrum, ambient_noise, band_level
from .planning import Knockdown, SensorPlan, Task, Wanted, place_sensors
from .range_test import RangeTest, fit_range_test
from .ranging import ranges_from_times, travel_times
from .sites import Site
from .telemetry import code_probability, no_collision
from .timing import Timing
from .waters import Member

__all__ = [
    "Area",
    "Hearing",
    "Knockdown",
    "LossSettings",
    "Losses",
    "Member",
    "Noise",
    "NoiseSpectrum",
    "RangeTest",
    "Reach",
    "Receiver",
    "SensorPlan",
    "Site",
    "SiteChoice",
    "Target",
    "Task",
    "Timing",
    "Wanted",
    "ambient_noise",
    "band_level",
    "choose_sites",
    "code_probability",
    "compute_losses",
    "detection_probability",
    "detection_range",
    "detection_ranges",
    "dilution_map",
    "fit_range_test",
    "locate",
    "losses_at",
    "no_collision",
    "place_sensors",
    "ranges_from_times",
    "signal_excess",
    "travel_times",
]
