"""Superparamagnetism: Neel-Brown relaxation of single-domain particles.

Diameters in nm, anisotropy in J/m3, temperatures in K, times in s. Neel, Ann. Geophys. 5, 99
(1949); Brown, Phys. Rev. 130, 1677 (1963). Published tables mix two conventions for cubic crystals,
so both are offered: ``full`` takes |K1| as the barrier per volume, ``barrier`` the true barrier,
K1/4 for K1 > 0 and |K1|/12 for K1 < 0. They agree for uniaxial crystals. Not included: interaction
between particles, and the spread of sizes, which usually dominates.
"""

import numpy as np
from numpy.typing import ArrayLike
from scipy import constants

from features.errors import PhysicsRangeError, explain
from features.stability_inputs import FloatArray, known_shape, positive

__all__ = [
    "barrier_density_J_m3",
    "blocking_temperature_K",
    "effective_anisotropy_J_m3",
    "log10_relaxation_time",
    "single_domain_diameter_nm",
    "superparamagnetic_diameter_nm",
]


def barrier_density_J_m3(
    K1_J_m3: ArrayLike, *, anisotropy: str = "uniaxial", convention: str = "full"
) -> FloatArray:
    """Return the barrier against reversal, per volume.

    Parameters
    ----------
    K1_J_m3 : array-like
        First anisotropy constant, not zero; its sign matters for cubic crystals.
    anisotropy : {"uniaxial", "cubic"}
        Symmetry.
    convention : {"full", "barrier"}
        ``full``: |K1|; ``barrier``: K1/4 or |K1|/12 for cubic crystals.

    Returns
    -------
    ndarray
        Energy density, J/m3.

    Raises
    ------
    PhysicsRangeError
        If the constant is zero or a name unknown.

    Examples
    --------
    >>> float(barrier_density_J_m3(48000.0, anisotropy="cubic", convention="barrier"))
    12000.0
    """
    K1 = np.asarray(K1_J_m3, dtype=np.float64)
    (size,) = positive(abs_K1_J_m3=np.abs(K1))
    cubic = known_shape(anisotropy, {"uniaxial": 0.0, "cubic": 1.0})
    true_barrier = known_shape(convention, {"full": 0.0, "barrier": 1.0})
    return size / np.where(K1 > 0, 4.0, 12.0) if cubic * true_barrier else size


def _log_times(measurement_time_s: ArrayLike, attempt_time_s: ArrayLike) -> FloatArray:
    """Return ln(measurement time / attempt time)."""
    measured, attempt = positive(
        measurement_time_s=measurement_time_s, attempt_time_s=attempt_time_s
    )
    if np.any(measured <= attempt):
        raise PhysicsRangeError(
            explain("measurement time out of range", expected="longer than the attempt time")
        )
    return np.asarray(np.log(measured / attempt), dtype=np.float64)


def superparamagnetic_diameter_nm(
    barrier_J_m3: ArrayLike,
    *,
    temperature_K: ArrayLike = 300.0,
    measurement_time_s: ArrayLike = 100.0,
    attempt_time_s: ArrayLike = 1e-9,
) -> FloatArray:
    """Return the diameter below which a sphere relaxes within the measurement.

    [6 kT ln(t/t0) / (pi K)]^(1/3); 100 s and 1 ns give K V = 25 kT, ten years 40 kT.

    Parameters
    ----------
    barrier_J_m3 : array-like
        Barrier per volume, > 0; see `barrier_density_J_m3`.
    temperature_K : array-like
        Temperature, > 0, below the Curie temperature.
    measurement_time_s, attempt_time_s : array-like
        Times, s, > 0; the first the longer. The attempt time is 1e-12 to 1e-9 s.

    Returns
    -------
    ndarray
        Diameter, nm.

    Raises
    ------
    PhysicsRangeError
        If an input is out of range.

    Examples
    --------
    >>> round(float(superparamagnetic_diameter_nm(1e5)), 1)
    12.6
    """
    barrier, temperature = positive(barrier_J_m3=barrier_J_m3, temperature_K=temperature_K)
    energy = constants.k * temperature * _log_times(measurement_time_s, attempt_time_s)
    return np.asarray(1e9 * np.cbrt(6.0 * energy / (np.pi * barrier)), dtype=np.float64)


def blocking_temperature_K(
    diameter_nm: ArrayLike,
    barrier_J_m3: ArrayLike,
    *,
    measurement_time_s: ArrayLike = 100.0,
    attempt_time_s: ArrayLike = 1e-9,
) -> FloatArray:
    """Return the temperature below which the moment is blocked.

    K V / (k ln(t/t0)). The anisotropy is taken as constant; near the Curie temperature it is not.

    Parameters
    ----------
    diameter_nm, barrier_J_m3 : array-like
        Diameter, nm, and barrier per volume, J/m3, > 0.
    measurement_time_s, attempt_time_s : array-like
        As for `superparamagnetic_diameter_nm`.

    Returns
    -------
    ndarray
        Temperature, K.

    Raises
    ------
    PhysicsRangeError
        If an input is out of range.

    Examples
    --------
    >>> d = superparamagnetic_diameter_nm(1e5, temperature_K=250.0)
    >>> round(float(blocking_temperature_K(d, 1e5)))
    250
    """
    d, barrier = positive(diameter_nm=diameter_nm, barrier_J_m3=barrier_J_m3)
    energy = barrier * np.pi / 6.0 * (d * 1e-9) ** 3
    log_times = _log_times(measurement_time_s, attempt_time_s)
    return np.asarray(energy / constants.k / log_times, dtype=np.float64)


def log10_relaxation_time(
    diameter_nm: ArrayLike,
    barrier_J_m3: ArrayLike,
    *,
    temperature_K: ArrayLike = 300.0,
    attempt_time_s: ArrayLike = 1e-9,
) -> FloatArray:
    """Return the decimal logarithm of the relaxation time in seconds.

    log10 of t0 exp(K V / kT).

    Parameters
    ----------
    diameter_nm, barrier_J_m3, temperature_K, attempt_time_s : array-like
        All > 0.

    Returns
    -------
    ndarray
        log10 of the time over 1 s.

    Raises
    ------
    PhysicsRangeError
        If an input is not positive.

    Examples
    --------
    >>> d = superparamagnetic_diameter_nm(1e5)
    >>> round(float(log10_relaxation_time(d, 1e5)), 6)
    2.0
    """
    d, barrier, temperature, attempt = positive(
        diameter_nm=diameter_nm,
        barrier_J_m3=barrier_J_m3,
        temperature_K=temperature_K,
        attempt_time_s=attempt_time_s,
    )
    exponent = barrier * np.pi / 6.0 * (d * 1e-9) ** 3 / (constants.k * temperature)
    return np.asarray(np.log10(attempt) + exponent / np.log(10.0), dtype=np.float64)


def effective_anisotropy_J_m3(
    volume_anisotropy_J_m3: ArrayLike, surface_anisotropy_J_m2: ArrayLike, diameter_nm: ArrayLike
) -> FloatArray:
    """Return the anisotropy with its surface term.

    K_V + 6 K_S / D (Bodker, Morup and Linderoth, Phys. Rev. Lett. 72, 282 (1994), recalled).

    Parameters
    ----------
    volume_anisotropy_J_m3, diameter_nm : array-like
        All > 0.
    surface_anisotropy_J_m2 : array-like
        Surface term, J/m2, any sign.

    Returns
    -------
    ndarray
        Anisotropy, J/m3.

    Raises
    ------
    PhysicsRangeError
        If an input is not positive.

    Examples
    --------
    >>> round(float(effective_anisotropy_J_m3(1.35e4, 1e-5, 6.0)))
    23500
    """
    volume, d = positive(volume_anisotropy_J_m3=volume_anisotropy_J_m3, diameter_nm=diameter_nm)
    return volume + 6e9 * np.asarray(surface_anisotropy_J_m2, dtype=np.float64) / d


def single_domain_diameter_nm(
    exchange_stiffness_J_m: ArrayLike,
    anisotropy_J_m3: ArrayLike,
    saturation_magnetisation_A_m: ArrayLike,
) -> FloatArray:
    """Return the largest single-domain diameter of a hard uniaxial sphere.

    72 sqrt(A K) / (mu0 Ms^2), valid when far above sqrt(A/K) (Kittel, Rev. Mod. Phys. 21, 541
    (1949)).

    Parameters
    ----------
    exchange_stiffness_J_m, anisotropy_J_m3, saturation_magnetisation_A_m : array-like
        All > 0.

    Returns
    -------
    ndarray
        Diameter, nm.

    Raises
    ------
    PhysicsRangeError
        If an input is not positive.

    Examples
    --------
    >>> round(float(single_domain_diameter_nm(3e-11, 5.2e5, 1.4e6)))
    115
    """
    A, K, Ms = positive(
        exchange_stiffness_J_m=exchange_stiffness_J_m,
        anisotropy_J_m3=anisotropy_J_m3,
        saturation_magnetisation_A_m=saturation_magnetisation_A_m,
    )
    return np.asarray(72e9 * np.sqrt(A * K) / (constants.mu_0 * Ms**2), dtype=np.float64)
