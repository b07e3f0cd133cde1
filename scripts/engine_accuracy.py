"""Measure the engine against direct quadrature on random cells; takes some minutes.

    python scripts/engine_accuracy.py [--cells 200] [--seed 7]

Cells run from 75°S to 75°N, from sea level to 5000 m, dry to moist, clean to hazy, with snowy
months; a quarter of them has a diurnal cloud cycle. Bars: relative error of the flux 0.3 % rms and
1 % at worst, flux lost by the chosen orientation 0.05 %.
"""

from __future__ import annotations

import argparse
import sys
import time
from pathlib import Path

import numpy as np

sys.path.insert(0, str(Path(__file__).parents[1] / "tests"))

from direct_quadrature import Panel
from engine_comparison import Comparison, compare, root_mean_square
from invented_cells import random_cells


def summary(title: str, found: list[Comparison]) -> str:
    """One block of figures."""
    lost = [each.lost_fine for each in found]
    fine = [each.flux_error_fine for each in found]
    return "\n".join(
        [
            f"{title}: {len(found)} cells",
            f"  flux error      rms {root_mean_square([c.flux_error for c in found]):.4%}, "
            f"worst {max(abs(c.flux_error) for c in found):.4%}",
            f"    every day, 4 min: rms {root_mean_square(fine):.4%}, "
            f"worst {max(map(abs, fine)):.4%}",
            f"  flux lost       worst {max(lost):.4%}, mean {np.mean(lost):.4%} "
            f"(third days, 10 min: worst {max(c.lost for c in found):.4%})",
            f"  flat flux error rms {root_mean_square([c.flat_error for c in found]):.4%}, "
            f"worst {max(abs(c.flat_error) for c in found):.4%}",
            f"  escape fraction worst {max(abs(c.escape_error) for c in found):.5f}, "
            f"irradiance worst {max(abs(c.irradiance_error) for c in found):.2f} W m-2, "
            f"a month's flux worst {max(c.worst_month for c in found):.2f} W m-2",
        ]
    )


def row(each: Comparison) -> str:
    """One cell in one line."""
    cell = each.cell
    return (
        f"  {each.bins:2d} bins {cell.latitude:6.1f}° {cell.elevation:5.0f} m "
        f"water {np.mean(cell.water_cm):.2f} cm aerosol {np.mean(cell.aerosol_550):.2f} "
        f"cloud {np.mean(cell.cloud):.2f} "
        f"albedo {np.min(cell.albedo):.2f}-{np.max(cell.albedo):.2f}"
        f": F {each.flux:.2f}, error {each.flux_error:+.3%}, lost {each.lost_fine:.3%}, "
        f"tilt {each.tilt:.1f} ({each.best_tilt:.1f}), "
        f"azimuth {each.azimuth:.0f} ({each.best_azimuth:.0f})"
    )


def main() -> None:
    """Compare and print."""
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("--cells", type=int, default=200)
    parser.add_argument("--seed", type=int, default=7)
    arguments = parser.parse_args()
    started = time.perf_counter()
    found = compare(random_cells(arguments.seed, arguments.cells), Panel())
    print(summary("All", found))
    for title, chosen in (
        ("Without a diurnal cycle", [c for c in found if c.bins == 1]),
        ("With a diurnal cycle", [c for c in found if c.bins > 1]),
    ):
        if chosen:
            print(summary(title, chosen))
    print("Largest flux errors:")
    print("\n".join(map(row, sorted(found, key=lambda c: -abs(c.flux_error))[:5])))
    print("Most flux lost:")
    print("\n".join(map(row, sorted(found, key=lambda c: -c.lost_fine)[:5])))
    print(f"{time.perf_counter() - started:.0f} s")


if __name__ == "__main__":
    main()
