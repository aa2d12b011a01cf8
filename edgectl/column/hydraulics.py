"""Sieve-tray hydraulics: weir crest, clear liquid, holdup.

References
----------
Francis weir formula with C = 1.84 m^0.5/s, end contractions neglected (ISO 1438
and any hydraulics text; from memory). Clear liquid as aeration factor times
weir height plus crest: common practice.
"""

from __future__ import annotations

from dataclasses import dataclass

FRANCIS_C = 1.84
"""[m^0.5/s]"""
GRAVITY_M_S2 = 9.81
DOWNCOMER_CLEARANCE_M = 0.02
"""Liquid head over the downcomer apron that adds to the back-up [m] (own choice)."""


@dataclass(frozen=True, slots=True)
class SieveTray:
    """Geometry of one single-pass sieve tray."""

    active_area_m2: float
    downcomer_area_m2: float
    weir_length_m: float
    weir_height_m: float
    aeration: float


def weir_crest_m(flow_m3_s: float, weir_length_m: float) -> float:
    """Liquid crest over a straight weir.

    Parameters
    ----------
    flow_m3_s : float
        Clear liquid flow [m3/s], not negative.
    weir_length_m : float
        Weir length [m].

    Returns
    -------
    float
        Crest [m].

    References
    ----------
    Francis formula, Q = 1.84 L h^1.5 (from memory).
    """
    return float((flow_m3_s / (FRANCIS_C * weir_length_m)) ** (2.0 / 3.0))


def tray_holdup_kmol(
    flow_kmol_h: float, density_kmol_m3: float, drop_head_m: float, tray: SieveTray
) -> float:
    """Liquid on the active area and in the downcomer.

    Parameters
    ----------
    flow_kmol_h : float
        Liquid leaving the tray [kmol/h].
    density_kmol_m3 : float
        Liquid molar density [kmol/m3].
    drop_head_m : float
        Tray pressure drop as head of clear liquid [m].
    tray : SieveTray
        Geometry.

    Returns
    -------
    float
        Holdup [kmol].

    References
    ----------
    Francis formula for the crest; aeration factor: common practice.
    """
    crest = weir_crest_m(flow_kmol_h / density_kmol_m3 / 3600.0, tray.weir_length_m)
    clear = tray.aeration * tray.weir_height_m + crest
    backup = clear + drop_head_m + DOWNCOMER_CLEARANCE_M
    return density_kmol_m3 * (tray.active_area_m2 * clear + tray.downcomer_area_m2 * backup)


def weir_lag_h(flow_kmol_h: float, density_kmol_m3: float, tray: SieveTray) -> float:
    """dn/dL of a tray: how long a change of liquid flow takes to leave it.

    Parameters
    ----------
    flow_kmol_h : float
        Liquid leaving the tray [kmol/h].
    density_kmol_m3 : float
        Liquid molar density [kmol/m3].
    tray : SieveTray
        Geometry.

    Returns
    -------
    float
        Lag [h].

    References
    ----------
    Derivative of the Francis formula: dh/dQ = (2/3) h / Q.
    """
    crest = weir_crest_m(flow_kmol_h / density_kmol_m3 / 3600.0, tray.weir_length_m)
    area = tray.active_area_m2 + tray.downcomer_area_m2
    return density_kmol_m3 * area * (2.0 / 3.0) * crest / flow_kmol_h
