"""Draw many sections and say how well the shear angle and its interval hold.

Usage: python scripts/calibration_study.py [sections] [seed]

Growth horizons over an exponential fault: 5 m pick noise alone, then with errors of
cut-offs (10 m in x, 5 m in z), regional dip and fault picks drawn too. 500 sections of
each take some minutes.
"""

import sys
import time
from pathlib import Path

import numpy as np

ROOT = Path(__file__).resolve().parents[1]
sys.path[:0] = [str(ROOT), str(ROOT / "tests")]

from growth_sections import Errors, Ground, drawn_section  # noqa: E402

from geomcore.calibration import angle_from_horizons, joint_angle  # noqa: E402

PICKS = Errors(picks=5.0)
ALL = Errors(picks=5.0, fault=5.0, cutoff_x=10.0, cutoff_z=5.0, regional_dip=0.002)
CASES = (
    ("5 m pick noise alone, 25 degrees", Ground(25.0), PICKS),
    ("all errors drawn, 25 degrees", Ground(25.0), ALL),
    ("all errors drawn, -12 degrees", Ground(-12.0), ALL),
)


def figures(found, truth):
    """Say bias, scatter, stated deviation, ratio, coverage and how many resolved."""
    told = [e for e in found if e.best is not None]
    error = np.array([e.mean - truth for e in told])
    rms = np.sqrt((error**2).mean())
    stated = np.sqrt(np.mean([e.sd**2 for e in told]))
    inside = np.mean([e.low <= truth <= e.high for e in told])
    resolved = np.mean([e.resolved for e in found])
    return (
        f"n {len(found)}  bias {error.mean():.3f}  rms {rms:.3f}  stated sd "
        f"{stated:.3f}  rms/sd {rms / stated:.2f}  90 % interval holds "
        f"{100 * inside:.1f} %  resolved {100 * resolved:.0f} %  largest error "
        f"{np.abs(error).max():.2f}"
    )


def main(count=500, seed=1):
    """Print one line a case, and one for five sections joined."""
    for name, ground, errors in CASES:
        rng = np.random.default_rng(seed)
        start = time.perf_counter()
        found = [
            angle_from_horizons(drawn_section(ground, errors, rng))
            for _ in range(count)
        ]
        spent = (time.perf_counter() - start) / count
        print(f"{name} ({spent:.2f} s a section)")
        print(f"    one section:   {figures(found, ground.angle)}")
        groups = [found[i : i + 5] for i in range(0, count - 4, 5)]
        if groups:
            joined = [joint_angle(group) for group in groups]
            print(f"    five jointly:  {figures(joined, ground.angle)}", flush=True)


if __name__ == "__main__":
    main(*(int(a) for a in sys.argv[1:3]))
