"""Where the beam meets the part, and how a bent part or curved grooves lie there."""

from dataclasses import dataclass

import numpy as np

from pitchsweep.analysis.part_ray import Local
from pitchsweep.analysis.records import FloatArray


@dataclass(frozen=True)
class _Place:
    """Where the beam meets the part (N,): across the grooves' plane, and how far on.

    ``across`` is counted along g from the stage axis, ``reach`` along the beam from
    the plane of the axis; both in mm, with the grooves still unturned.
    """

    across: FloatArray
    reach: FloatArray


def _place_on_part(local: FloatArray) -> _Place:
    a, c = local[:, Local.INCIDENCE], np.cos(local[:, Local.INCIDENCE])
    x, surface = local[:, Local.BEAM_X], local[:, Local.SURFACE]
    return _Place((x - surface * np.sin(a)) / c, (x * np.sin(a) - surface) / c)


def where_it_meets(local: FloatArray) -> FloatArray:
    """Incidence and azimuth as they are where the beam meets the part.

    On a curved part the normal leans by place / radius; grooves around a centre have
    turned by the place along them over the distance from the centre. The azimuth is
    that of the grooves at the beam's height on the stage axis, as a person sees it in
    the level of the orders.
    """
    met, place = local.copy(), _place_on_part(local)
    met[:, Local.INCIDENCE] += local[:, Local.CURVATURE] * place.across
    if local[:, Local.TRACK].any():
        met[:, Local.AZIMUTH] += _groove_turn(local, place).turn
    return met


@dataclass(frozen=True)
class _Turn:
    """Turn (N,) of curved grooves where the beam meets them, and its slopes."""

    turn: FloatArray
    by_across: FloatArray
    by_height: FloatArray
    by_azimuth: FloatArray
    by_track: FloatArray


def _groove_turn(local: FloatArray, place: _Place) -> _Turn:
    track, across = local[:, Local.TRACK], place.across
    height = local[:, Local.BEAM_RMS] + local[:, Local.ELEVATION] * place.reach
    c, s = np.cos(local[:, Local.AZIMUTH]), np.sin(local[:, Local.AZIMUTH])
    along, away = height * c - across * s, 1.0 + track * across
    by_along = track / away
    return _Turn(
        turn=along * by_along,
        by_across=-by_along * (s + along * by_along),
        by_height=by_along * c,
        by_azimuth=-by_along * (height * s + across * c),
        by_track=along / away**2,
    )


def chain_place(local: FloatArray, jacobian: FloatArray) -> None:
    """From derivatives by incidence and azimuth met to those by what makes them.

    Changes ``jacobian`` (N, 2, N_LOCAL) of ``where_it_meets(local)`` into that of
    ``local`` (N, N_LOCAL).
    """
    a, place = local[:, Local.INCIDENCE], _place_on_part(local)
    met = jacobian[:, :, Local.INCIDENCE].copy()
    jacobian[:, :, Local.CURVATURE] = met * place.across[:, None]
    by_across = met * local[:, None, Local.CURVATURE]
    by_reach = np.zeros_like(by_across)
    jacobian[:, :, Local.BEAM_RMS] = jacobian[:, :, Local.BEAM_Y]
    if local[:, Local.TRACK].any():
        turned, turn = jacobian[:, :, Local.AZIMUTH].copy(), _groove_turn(local, place)
        climb = local[:, Local.ELEVATION]
        by_across = by_across + turned * turn.by_across[:, None]
        by_reach = turned * (turn.by_height * climb)[:, None]
        for column, slope in (
            (Local.AZIMUTH, turn.by_azimuth),
            (Local.BEAM_RMS, turn.by_height),
            (Local.ELEVATION, turn.by_height * place.reach),
            (Local.TRACK, turn.by_track),
        ):
            jacobian[:, :, column] += turned * slope[:, None]
    for column, across, reach in (
        (Local.INCIDENCE, place.reach / np.cos(a), place.across / np.cos(a)),
        (Local.BEAM_X, 1.0 / np.cos(a), np.tan(a)),
        (Local.SURFACE, -np.tan(a), -1.0 / np.cos(a)),
    ):
        jacobian[:, :, column] += by_across * across[:, None]
        jacobian[:, :, column] += by_reach * reach[:, None]
