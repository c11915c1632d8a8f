"""Default settings of searches and studies: the one place where tolerances that decide physics are chosen."""

from __future__ import annotations

from frg.solve.fixedpoint import Judgement
from frg.solve.functional import GridNewton
from frg.solve.ladder import LadderScan
from frg.solve.newton import Newton
from frg.solve.planeladder import PlaneScan
from frg.solve.search import SearchSettings
from frg.solve.shooting import ShootingScan
from frg.study.convergence import StudySettings
from frg.study.tracking import TrackingSettings
from frg.study.verdict import VerdictSettings


def search_settings(*, thorough: bool, single: bool = False) -> SearchSettings:
    """Settings of `converge`, and with `single` of `solve`, whose one order can afford more starts;
    `thorough` (--all) tries more starts and finer scans."""
    return SearchSettings(
        starts=128 if thorough or single else 32,
        rounds=8 if thorough else (3 if single else 2),
        later_rounds=4 if thorough else 1,
        stream=20240917,
        duplicate=1e-6,
        polish=4,
        newton=Newton(iterations=60 if thorough else 40, halvings=4, step=1e-10),
        ladder=LadderScan(low=-1.0, high=4.0, points=6144 if thorough else 1536, halvings=44),
        shooting=ShootingScan(
            low=-0.97, high=1.0, points=1536 if thorough else 768,
            reaches=(2.5, 3.0, 4.0, 5.0, 6.5, 8.0), steps=500, rounds=8,
        ),
        grid=GridNewton(iterations=40, halvings=8, step=1e-9),
        plane=PlaneScan(first=8.0, second=12.0, points=241 if thorough else 121),
        grid_agreement=1e-5,
        judgement=Judgement(marginal=1e-6, residual=1e-8, gaussian=1e-7),
    )


def study_settings(*, thorough: bool, single: bool = False) -> StudySettings:
    """Settings of `converge` and, with `single`, of `solve`."""
    return StudySettings(
        search=search_settings(thorough=thorough, single=single),
        tracking=TrackingSettings(reach=0.7, shortest=2, most=8),
        verdict=VerdictSettings(settled=3, sinking=0.5, runaway=0.2, exponents=4),
    )
