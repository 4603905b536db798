"""One effect at a time through the photons door: what only frames can show.

Usage: python tests/benchmarks/effects_photons.py [--seeds N]
Whole sweeps of demo:shims with one effect switched on; prints off/u, u/d, warnings or
the refusal. The last column says whether it lies within 3 u, warned or was refused.
"""

import argparse
import sys
from pathlib import Path
from typing import Any

sys.path.insert(0, str(Path(__file__).resolve().parents[1]))

from builders import demo_job  # noqa: E402
from whole_sweep import whole_sweep  # noqa: E402

EFFECTS: dict[str, dict[str, Any]] = {
    "no speckle": {"speckle_contrast": 0.0},
    "halo 10 %": {"halo_fraction": 0.1},
    "lopsided 10 %": {"lopsided_fraction": 0.1},
    "ghosts 5 %": {"ghost_fraction": 0.05},
    "500 hot pixels": {"hot_pixels": 500},
    "room light 2000 dn/s": {"room_light_dn_per_s": 2000.0},
    "room light step 2000 dn/s": {"room_light_step_dn_per_s": 2000.0},
    "screen bow 0.2 mm": {"screen_bow_mm": 0.2},
    "lens distortion 0.5 mm": {"distortion_mm": 0.5},
    "camera shift 3 mm/h": {"camera_shift_um_per_h": 3000.0},
    "part radius 10 m": {"part_radius_m": 10.0},
    "cover 0.6 mm": {"cover_thickness_mm": 0.6},
    "track radius 40 mm": {"track_radius_mm": 40.0},
    "part ends 2.5 mm off": {"part_edge_mm": 2.5},
    "leftover backlash 10 arcsec": {"leftover_backlash_arcsec": 10.0},
    "missing orders 20 %": {"missing_fraction": 0.2},
}


def main() -> int:
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--seeds", type=int, default=2)
    options = parser.parse_args()
    print(f"{'effect':26} seed   off/u   u/d      within 3 u, warned or refused")
    silent = 0
    for name, effects in EFFECTS.items():
        for seed in range(options.seeds):
            done = whole_sweep(demo_job("shims", effects=effects), seed)
            if done.exit_code != 0:
                good, row = done.exit_code in (3, 6), f"exit {done.exit_code}"
            else:
                warned = len(done.result["warnings"])
                good = abs(done.off_in_u) <= 3.0 or warned > 0
                row = f"{done.off_in_u:+6.2f}  {done.relative_u:.2e}"
                row += f"  {warned} warned" if warned else ""
            silent += not good
            print(f"{name:26} {seed:4d}  {row}  {'yes' if good else 'NO'}", flush=True)
    return 0 if silent == 0 else 1


if __name__ == "__main__":
    raise SystemExit(main())
