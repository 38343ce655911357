"""Patterns whose figures are known in closed form, as pattern objects."""

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from planner.antenna.pattern import Pattern, PatternKind


@dataclass(frozen=True, slots=True, kw_only=True)
class Analytic(Pattern):
    """Radiation intensity as a function of azimuth and elevation in radians; any scale."""

    name: str = "analytic"
    gain_dbi: float = 0.0
    azimuth_beamwidth_deg: float = 90.0
    elevation_beamwidth_deg: float = 90.0
    kind: PatternKind = "model"
    intensity: Callable

    def gain(self, azimuth_offset_deg, elevation_deg, *, electrical_downtilt_deg=None):
        azimuth = np.radians(np.asarray(azimuth_offset_deg, dtype=float))
        elevation = np.radians(
            np.asarray(elevation_deg, dtype=float) + self.steering_deg(electrical_downtilt_deg)
        )
        azimuth, elevation = np.broadcast_arrays(azimuth, elevation)
        with np.errstate(divide="ignore", invalid="ignore"):
            return self.gain_dbi + 10.0 * np.log10(self.intensity(azimuth, elevation))


def half_wave_dipole(azimuth, elevation):
    """Upright; (cos(90 deg cos t) / sin t)², t from the axis."""
    cosine = np.cos(elevation)
    safe = np.where(cosine < 1e-9, 1.0, cosine)
    return np.where(cosine < 1e-9, 0.0, (np.cos(0.5 * np.pi * np.sin(elevation)) / safe) ** 2)


def cosine_power(n, *, azimuth_deg=0.0, elevation_deg=0.0):
    """cos^n of the angle from a direction, nothing behind: directivity 2 (n + 1)."""
    a, e = np.radians(azimuth_deg), np.radians(elevation_deg)

    def intensity(azimuth, elevation):
        along = np.cos(elevation) * np.cos(e) * np.cos(azimuth - a) + np.sin(elevation) * np.sin(e)
        return np.where(along > 0.0, np.maximum(along, 0.0) ** n, 0.0)

    return intensity


def upright_array(count, spacing_wavelengths, *, downtilt_deg=0.0):
    """Isotropic elements in an upright row, all alike, their phases set for a downtilt."""
    step = 2.0 * np.pi * spacing_wavelengths

    def intensity(azimuth, elevation):
        half = 0.5 * step * (np.sin(elevation) + np.sin(np.radians(downtilt_deg)))
        in_phase = np.abs(np.sin(half)) < 1e-9
        safe = np.where(in_phase, 1.0, np.sin(half))
        return np.where(in_phase, 1.0, np.sin(count * half) / (count * safe)) ** 2

    return intensity


def upright_array_directivity(count, spacing_wavelengths, *, downtilt_deg=0.0):
    """Closed form: N² / (N + 2 sum (N - m) sin(m k d)/(m k d) cos(m k d sin tilt))."""
    step = 2.0 * np.pi * spacing_wavelengths
    m = np.arange(1, count)
    ripple = np.sinc(m * step / np.pi) * np.cos(m * step * np.sin(np.radians(downtilt_deg)))
    return count**2 / (count + 2.0 * np.sum((count - m) * ripple))


def line_source(length_wavelengths):
    """An upright line, evenly fed: (sin u / u)², u = pi L / wavelength * sin(elevation)."""
    return lambda azimuth, elevation: np.sinc(length_wavelengths * np.sin(elevation)) ** 2
