"""Light: who sees the Sun, and what sunlight reaches the facets."""

from smallbody.light.course import Course, course, lit_on_course, whole_rotations
from smallbody.light.horizons import Horizons, horizons_of, no_shadows
from smallbody.light.sun import (
    Places,
    SunOnBody,
    eccentric_anomaly,
    mean_sunlight,
    places_at,
    places_between,
    places_in_true_anomaly,
    pole_vector,
    sun_on_body,
    true_anomaly,
)
from smallbody.light.sunlight import LightSums, LightTable, light_sums, lit_cosines, lit_latitudes

__all__ = [
    "Course",
    "Horizons",
    "LightSums",
    "LightTable",
    "Places",
    "SunOnBody",
    "course",
    "eccentric_anomaly",
    "horizons_of",
    "light_sums",
    "lit_cosines",
    "lit_latitudes",
    "lit_on_course",
    "mean_sunlight",
    "no_shadows",
    "places_at",
    "places_between",
    "places_in_true_anomaly",
    "pole_vector",
    "sun_on_body",
    "true_anomaly",
    "whole_rotations",
]
