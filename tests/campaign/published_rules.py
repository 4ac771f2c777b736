"""Published tuning rules, each with its source: reference functions for checks and campaign, never part of the tool.

Every rule returns gains of the ideal standard form Kc (1 + 1/(Ti s) + Td s); Ti = inf without integral action.
Models are K exp(-L s)/(T s + 1), or k' exp(-L s)/s where a rule is for integrating plants.
"""

import math
from dataclasses import dataclass


@dataclass(frozen=True)
class Tuning:
    """Kc (1 + 1/(Ti s) + Td s); times in the model's unit of time.

    Attributes
    ----------
    gain, integral_time, derivative_time : float
    """

    gain: float
    integral_time: float = math.inf
    derivative_time: float = 0.0


def ziegler_nichols_step(structure: str, a: float, L: float, *, original_pi: bool = False) -> Tuning:
    """Ziegler & Nichols, Trans. ASME 64 (1942) 759-768, reaction curve: a = slope times L.

    P 1/a; PI 0.9/a, 3 L (3.33 L in the original); PID 1.2/a, 2 L, L/2.
    """
    if structure == "P":
        return Tuning(1.0 / a)
    if structure == "PI":
        return Tuning(0.9 / a, (0.9 / 0.27 if original_pi else 3.0) * L)
    return Tuning(1.2 / a, 2.0 * L, 0.5 * L)


def ziegler_nichols_ultimate(structure: str, ultimate_gain: float, ultimate_period: float) -> Tuning:
    """Ziegler & Nichols, Trans. ASME 64 (1942) 759-768, ultimate gain.

    P 0.5 Ku; PI 0.45 Ku, Pu/1.2; PID 0.6 Ku, Pu/2, Pu/8.
    """
    if structure == "P":
        return Tuning(0.5 * ultimate_gain)
    if structure == "PI":
        return Tuning(0.45 * ultimate_gain, ultimate_period / 1.2)
    return Tuning(0.6 * ultimate_gain, ultimate_period / 2.0, ultimate_period / 8.0)


def tyreus_luyben(ultimate_gain: float, ultimate_period: float) -> Tuning:
    """Tyreus & Luyben, Ind. Eng. Chem. Res. 31 (1992) 2625, PI: Ku/3.2, 2.2 Pu."""
    return Tuning(ultimate_gain / 3.2, 2.2 * ultimate_period)


def cohen_coon(structure: str, K: float, T: float, L: float) -> Tuning:
    """Cohen & Coon, Trans. ASME 75 (1953) 827-834, with r = L/T."""
    r = L / T
    scale = 1.0 / (K * r)
    if structure == "P":
        return Tuning(scale * (1.0 + r / 3.0))
    if structure == "PI":
        return Tuning(scale * (0.9 + r / 12.0), L * (30.0 + 3.0 * r) / (9.0 + 20.0 * r))
    if structure == "PD":
        return Tuning(scale * (1.25 + r / 6.0), math.inf, L * (6.0 - 2.0 * r) / (22.0 + 3.0 * r))
    return Tuning(scale * (4.0 / 3.0 + r / 4.0), L * (32.0 + 6.0 * r) / (13.0 + 8.0 * r), 4.0 * L / (11.0 + 2.0 * r))


def amigo(structure: str, K: float, T: float, L: float) -> Tuning:
    """AMIGO: Astrom & Hagglund, J. Process Control 14 (2004) 635-650; Advanced PID Control (ISA, 2006) Sec. 7.3."""
    if structure == "PI":
        gain = 0.15 / K + (0.35 - L * T / (L + T) ** 2) * T / (K * L)
        return Tuning(gain, 0.35 * L + 13.0 * L * T**2 / (T**2 + 12.0 * L * T + 7.0 * L**2))
    return Tuning((0.2 + 0.45 * T / L) / K, (0.4 * L + 0.8 * T) * L / (L + 0.1 * T), 0.5 * L * T / (0.3 * L + T))


def simc_pi(K: float, T: float, L: float, closed_loop_time: float | None = None) -> Tuning:
    """SIMC PI: Skogestad, J. Process Control 13 (2003) 291-309; tau_c = L unless given.

    Kc = T/(K (tau_c + L)), Ti = min(T, 4 (tau_c + L)).
    """
    lag = (L if closed_loop_time is None else closed_loop_time) + L
    return Tuning(T / (K * lag), min(T, 4.0 * lag))


def simc_pi_integrating(k: float, L: float, closed_loop_time: float | None = None) -> Tuning:
    """SIMC PI for k exp(-L s)/s, same source: Kc = 1/(k (tau_c + L)), Ti = 4 (tau_c + L)."""
    lag = (L if closed_loop_time is None else closed_loop_time) + L
    return Tuning(1.0 / (k * lag), 4.0 * lag)


def simc_pid_series(K: float, T1: float, T2: float, L: float, closed_loop_time: float | None = None) -> Tuning:
    """SIMC PID for two lags T1 >= T2, same source; SERIES form Kc (1 + 1/(Ti s)) (Td s + 1) with Td = T2."""
    pi = simc_pi(K, T1, L, closed_loop_time)
    return Tuning(pi.gain, pi.integral_time, T2)


def half_rule(lags: tuple[float, ...], inverse: tuple[float, ...], delay: float, order: int) -> tuple[float, ...]:
    """Half rule, same source, Sec. 2: (lags kept ..., dead time); `inverse` are the T of zeros (1 - T s).

    Half of the largest neglected lag goes to the smallest kept one and half to the dead time, with all smaller lags.
    """
    ordered = sorted(lags, reverse=True)
    kept, neglected = ordered[:order], ordered[order:]
    half = 0.5 * neglected[0] if neglected else 0.0
    kept[-1] += half
    return (*kept, delay + half + sum(neglected[1:]) + sum(inverse))


def lambda_pi(K: float, T: float, L: float, closed_loop_time: float) -> Tuning:
    """Lambda tuning: Dahlin 1968; Rivera, Morari & Skogestad 1986: Kc = T/(K (lambda + L)), Ti = T."""
    return Tuning(T / (K * (closed_loop_time + L)), T)
