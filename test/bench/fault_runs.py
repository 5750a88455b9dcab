"""Benches with faults, and what of their samples is looked at."""

from bench_rigs import BAY_HEAD, exact_bench, quiet_imu, quiet_pose, with_tether
import numpy as np

from suspended_ctrl.bench.bench import Bench
from suspended_ctrl.bench.faults import FaultFile

QUIET = quiet_pose(quiet_imu(BAY_HEAD))
# Ten times the damping: bounces die away at c / 2m = 1.2 /s.
DAMPED = with_tether(QUIET, damping_n_s_per_m=15.0)
IDLE = np.full(8, 300.0)


def faults(*entries: dict) -> tuple:
    """Return faults as a file with these entries would give them."""
    def plain(value):
        if isinstance(value, dict):
            return {key: plain(one) for key, one in value.items()}
        return tuple(value) if isinstance(value, list) else value
    return FaultFile.model_validate({'faults': tuple(plain(e) for e in entries)}).faults


def bench_with(*entries: dict, rig=QUIET, start_s: float = 0.0, **options) -> Bench:
    """Return a bench of sensors that do not err, its faults counting from ``start_s``."""
    bench = exact_bench(rig, faults=faults(*entries), **options)
    bench.path_start_s = start_s
    return bench


def of(samples: list, kind: type) -> list:
    """Pick samples of one kind."""
    return [sample for sample in samples if type(sample) is kind]


def stamps(samples: list, kind: type) -> np.ndarray:
    """Stamps of samples of one kind."""
    return np.array([sample.stamp_s for sample in of(samples, kind)])
