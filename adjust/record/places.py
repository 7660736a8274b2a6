"""Entries of the record about places: stations, lines, control marks, parameters."""

from __future__ import annotations

import math
from typing import Any

import numpy as np

from adjust.graph.parts import HEIGHT, PLANE
from adjust.judge import critical
from adjust.judge.assess import Judgement
from adjust.judge.ellipses import ellipses
from adjust.network import ROLES, Array, Bools, Group
from adjust.record.numbers import angle, coordinate, number
from adjust.solver.solution import Solution


def station_entries(judgement: Judgement) -> list[dict[str, Any]]:
    """One entry a station that was adjusted or held in the adjustment, in the order of the book."""
    solution, cov = judgement.solution, judgement.covariance
    n = len(solution.names)
    shapes = _Shapes(judgement, cov[:, :2, :2])
    sd = np.sqrt(np.maximum(np.einsum("nii->ni", cov), 0.0))
    entries = []
    for i in range(n):
        if np.isnan(solution.positions[i]).all():
            continue
        role, role_height = _roles(solution, i)
        entries.append(
            {
                "station": solution.names[i],
                "role": role,
                "role_height": role_height,
                "change_point": solution.names[i] in solution.job.private,
            }
            | {key: coordinate(x) for key, x in zip(("east", "north", "height"), solution.positions[i], strict=True)}
            | {key: number(x) for key, x in zip(("sd_east", "sd_north", "sd_height"), sd[i], strict=True)}
            | {"covariance": [[number(x) for x in row] for row in cov[i].tolist()]}
            | shapes.entry(i)
            | {"circle_confidence": shapes.circle(i)}
        )
    return entries


def side_shot_entries(judgement: Judgement) -> list[dict[str, Any]]:
    """Stations that unchecked readings only fix, with those readings."""
    if judgement.all_checked:
        return []
    solution, ids = judgement.solution, judgement.ids
    sd = np.sqrt(np.maximum(np.einsum("nii->ni", judgement.covariance), 0.0))
    return [
        {"station": solution.names[i]}
        | {key: coordinate(x) for key, x in zip(("east", "north", "height"), solution.positions[i], strict=True)}
        | {key: number(x) for key, x in zip(("sd_east", "sd_north", "sd_height"), sd[i], strict=True)}
        | {"readings": list(dict.fromkeys(ids[r] for r in rows))}
        for i, rows in judgement.unchecked.side_shots.items()
    ]


class _Shapes:
    """Standard and confidence ellipses of covariances (n, 2, 2)."""

    def __init__(self, judgement: Judgement, cov: Array) -> None:
        self.known = [not bool(np.isnan(one).any()) for one in cov]
        filled = np.nan_to_num(cov)
        self.a, self.b, self.azimuth = ellipses(filled)
        self.confidence = judgement.tests.confidence
        self.multiplier = critical.ellipse_multiplier(self.confidence, judgement.degrees)
        self.radius = critical.circle_radius(self.a, self.b, self.confidence, judgement.degrees)

    def entry(self, i: int) -> dict[str, Any]:
        """The two ellipses of item i, None where not determined."""
        if not self.known[i]:
            return {"ellipse": None, "ellipse_confidence": None}
        standard = self._ellipse(i, 1.0)
        if self.multiplier is None:
            return {"ellipse": standard, "ellipse_confidence": None}
        return {
            "ellipse": standard,
            "ellipse_confidence": self._ellipse(i, self.multiplier) | {"confidence": self.confidence},
        }

    def _ellipse(self, i: int, factor: float) -> dict[str, Any]:
        return {"semi_major": number(self.a[i] * factor), "semi_minor": number(self.b[i] * factor),
                "azimuth": angle(self.azimuth[i])}  # fmt: skip

    def circle(self, i: int) -> float | None:
        """Radius of the confidence circle."""
        return number(self.radius[i]) if self.known[i] else None


def _roles(solution: Solution, i: int) -> tuple[str, str]:
    """Role in the plane and in height; a part with a free datum holds nothing, so its marks count as new."""
    role = solution.network.stations.role[i].copy()
    for part in solution.parts:
        if part.datum and part.datum.free:
            touched: Bools = part.datum.part.nodes[i][[PLANE, PLANE, HEIGHT]]
            role[touched & (role != 3)] = 0
    in_plane = not np.isnan(solution.positions[i, 0])
    in_height = not np.isnan(solution.positions[i, 2])
    plane, height = ROLES[role[:2].max()], ROLES[role[2]]
    return (plane if in_plane else height), (height if in_height else plane)


def line_entries(judgement: Judgement) -> list[dict[str, Any]]:
    """One entry a line, in the order of the book, then the pairs."""
    lines, names = judgement.lines, judgement.solution.names
    shapes = _Shapes(judgement, lines.covariance)
    return [
        {
            "from": names[lines.start[k]],
            "to": names[lines.end[k]],
            "distance": coordinate(lines.distance[k]),
            "azimuth": angle(lines.azimuth[k]),
            "sd_distance": number(lines.sd_distance[k]),
            "sd_azimuth": number(lines.sd_azimuth[k]),
            "sd_height_difference": number(lines.sd_height[k]),
        }
        | shapes.entry(k)
        for k in range(len(lines.start))
    ]


def mark_entries(judgement: Judgement) -> list[dict[str, Any]]:
    """Verdicts on control marks."""
    return [
        {"station": m.station, "part": m.part, "misfit": None if m.misfit is None else coordinate(m.misfit),
         "sd": number(m.sd), "verdict": m.verdict, "sentence": m.sentence}
        for m in judgement.control
    ]  # fmt: skip


def parameter_entries(judgement: Judgement) -> list[dict[str, Any]]:
    """Group unknowns with their standard deviations: orientations, turns, refraction."""
    solution = judgement.solution
    sd = _group_sd(judgement)
    return [
        {"what": g.what, "of": g.of, "value": _group_value(g, solution.groups[i]), "sd": number(sd[i])}
        for i, g in enumerate(solution.network.groups)
    ]


def _group_value(group: Group, value: float) -> float | None:
    return angle(value % (2 * np.pi)) if group.turns else number(value)


def _group_sd(judgement: Judgement) -> Array:
    """(g,) standard deviations: cov(t) = R^-1 (I + Q'A~ Q_xx A~'Q) R^-T for local ones."""
    solution = judgement.solution
    out = np.full(len(solution.groups), np.nan)
    shared = solution.design.unknowns.shared
    numbered = shared >= 0
    out[numbered] = np.sqrt(np.maximum(solution.cofactors.entries(shared[numbered], shared[numbered]), 0.0))
    for w in solution.whitened:
        g = w.batch.locals.shape[1]
        if g:
            blocks = solution.cofactors.blocks(w.batch.columns)
            load = w.q.transpose(0, 2, 1) @ w.a
            inner = np.eye(g) + load @ blocks @ load.transpose(0, 2, 1)
            half = np.linalg.solve(w.r, inner)
            cov = np.linalg.solve(w.r, half.transpose(0, 2, 1))
            out[w.batch.locals] = np.sqrt(np.einsum("bii->bi", cov))
    return out * math.sqrt(judgement.scale)
