"""From an Overview to the columns the browser needs: float32, whole dicts, ready for ``ColumnDataSource.data``."""

from dataclasses import dataclass

import numpy as np
from scipy.interpolate import CubicSpline

from app.theme import file_stem

MOST_ROWS = 24          # modes with a row of their own in the share map
MAP_COLUMNS = 480       # of the share map, uniform in log frequency
FADE_DB = 25.0          # columns this far below the band's mean level are faded
MOVING_SHARE = 0.01     # a mode that never makes this share of the motion is left out of the section
SHAPE_POINTS = 201      # of a drawn shape, evenly spaced


@dataclass(frozen=True)
class Columns:
    """One dict of columns per source; ``still`` is what does not depend on a mode or a frequency (one row)."""

    level: dict     # x (log10 Hz), frequency, level_db, survival, made (Pa: sum of all contributions' magnitudes)
    rows: dict      # re, im (n_freq * n_rows): contribution of each row of the share map, Pa, frequency leading
    motion: dict    # re, im (n_freq * n_moving): amplitude of each moving mode, m
    shapes: dict    # radial, axial (n_moving * n_points)
    nodes: dict     # radius, height (n_points), m, from centre to frame
    gallery: dict   # one row per mode of the map, lowest first
    moving: dict    # row: the share-map row of each moving mode, -1 if it is among the others
    share: dict     # image: one (n_rows, n_columns) array, lowest row last mode; x, y, dw, dh
    veil: dict      # image: one (1, n_columns) array, 1 where faded
    still: dict


def columns(overview):
    """Columns of an Overview."""
    response, modes, rest = overview.response, overview.response.modes, overview.response.rest
    n_modes = len(modes.frequency)
    shown = np.sort(np.argsort(-overview.energy_share[:n_modes], kind="stable")[:MOST_ROWS])
    others = np.setdiff1d(np.arange(n_modes), shown)
    by_row = _by_row(response.contribution, shown, others)
    moving = _moving(response.displacement, shown)
    radius, height, radial, axial = _smooth(rest, modes.radial[moving], modes.axial[moving])
    low, high = (np.log10(edge) for edge in overview.band)
    image, veil = _map(response, _by_row(response.signed_share, shown, others), low, high)
    n_rows = by_row.shape[1]
    placed = {"x": [low], "y": [0], "dw": [high - low]}
    return Columns(
        level={"x": np.log10(response.frequency).astype(np.float32), "frequency": _short(response.frequency),
               "level_db": _short(response.level_db), "survival": _short(response.survival),
               "made": _short(np.abs(response.contribution).sum(axis=1))},
        rows=_two(by_row), motion=_two(response.displacement[:, moving]),
        shapes={"radial": radial, "axial": axial}, nodes={"radius": radius, "height": height},
        gallery=_gallery(overview, shown, moving),
        moving={"row": np.array([_place(shown, m) for m in moving], np.int32)},
        share={"image": [image], "dh": [n_rows], **placed}, veil={"image": [veil], "dh": [n_rows], **placed},
        still=_still(overview, n_rows, shown, others))


def _short(values):
    return np.ascontiguousarray(values, dtype=np.float32)


def _two(values):
    """A complex matrix as two flat columns, frequency leading."""
    return {"re": _short(values.real.ravel()), "im": _short(values.imag.ravel())}


def _by_row(values, shown, others):
    """Columns of the share map: the shown modes, the sum of the others if there are any, the residual."""
    parts = [values[:, shown], values[:, -1:]]
    if len(others):
        parts.insert(1, values[:, others].sum(axis=1, keepdims=True))
    return np.hstack(parts)


def _moving(displacement, shown):
    """Modes the section needs: all shown ones and whatever else moves visibly at some frequency."""
    size = np.abs(displacement)
    total = size.sum(axis=1, keepdims=True)
    share = np.divide(size, total, out=np.zeros_like(size), where=total > 0)
    return np.union1d(shown, np.flatnonzero(share.max(axis=0) > MOVING_SHARE))


def _smooth(rest, radial, axial):
    """Rest radius and height (n_points,), shapes (n_moving * n_points) flat, splines through the nodes."""
    along = np.linspace(rest.reference_radius[0], rest.reference_radius[-1], SHAPE_POINTS)
    stack = np.vstack([rest.radius, rest.height, radial, axial])
    drawn = CubicSpline(rest.reference_radius, stack, axis=1)(along)
    return tuple(_short(part.ravel()) for part in np.split(drawn, [1, 2, 2 + len(radial)]))


def _place(sorted_values, value):
    found = np.searchsorted(sorted_values, value)
    return int(found) if found < len(sorted_values) and sorted_values[found] == value else -1


def _map(response, share, low, high):
    """Mean signed share in each column, lowest mode in the top row, and the veil over quiet columns.

    A column is the mean over its width of the straight lines between the response's frequencies, so that no narrow peak
    is missed and columns still sum to the survival.
    """
    x = np.log10(response.frequency)
    edges = np.clip(np.linspace(low, high, MAP_COLUMNS + 1), x[0], x[-1])
    values = np.column_stack([share, response.level_db])
    running = np.vstack([np.zeros((1, values.shape[1])),
                         np.cumsum(0.5 * (values[1:] + values[:-1]) * np.diff(x)[:, None], axis=0)])
    at = np.clip(np.searchsorted(x, edges, side="right") - 1, 0, len(x) - 2)
    step = (edges - x[at])[:, None]
    slope = (values[at + 1] - values[at]) / (x[at + 1] - x[at])[:, None]
    integral = running[at] + values[at] * step + 0.5 * slope * step**2
    width = np.diff(edges)[:, None]
    mean = np.divide(np.diff(integral, axis=0), width, out=np.zeros((MAP_COLUMNS, values.shape[1])), where=width > 0)
    level, inside = mean[:, -1], width[:, 0] > 0
    quiet = ~inside | (level < level[inside].mean() - FADE_DB)
    return _short(mean[:, -2::-1].T), _short(quiet[None, :])


def _gallery(overview, shown, moving):
    modes = overview.response.modes
    kind = [modes.kind[m] for m in shown]
    rank = [modes.kind[:m].count(modes.kind[m]) for m in shown]  # counts within its kind: what "the same mode" means
    return {"mode": shown.astype(np.int32), "frequency": _short(modes.frequency[shown]),
            "frequency_vacuum": _short(modes.frequency_vacuum[shown]), "kind": kind,
            "rank": np.array(rank, np.int32), "damping_ratio": _short(modes.damping_ratio[shown]),
            "energy_share": _short(overview.energy_share[shown]), "centre_share": _short(modes.centre_share[shown]),
            "in_plane_share": _short(modes.in_plane_share[shown]),
            "shape": np.array([_place(moving, m) for m in shown], np.int32)}


def _still(overview, n_rows, shown, others):
    design, response = overview.design, overview.response
    in_plane = [m for m, kind in enumerate(response.modes.kind) if kind == "in-plane"]
    free = design.centre.spring_free_height if design.centre.spring_rate > 0 else np.nan
    return {"stem": [file_stem(design.name)], "low": [overview.band[0]], "high": [overview.band[1]], "n_rows": [n_rows],
            "n_shown": [len(shown)], "n_others": [len(others)], "estimate_above": [min(response.estimate_above, 1e9)],
            "frame_radius": [design.geometry.frame_radius], "centre_radius": [design.geometry.centre_radius],
            "centre_height": [response.rest.centre_height], "spring_free_height": [None if np.isnan(free) else free],
            "rear_volume": [design.rear.volume if design.rear.kind == "sealed" else None],
            "in_plane_count": [len(in_plane)], "in_plane_share": [float(overview.energy_share[in_plane].sum())]}
