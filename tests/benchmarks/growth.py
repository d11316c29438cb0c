"""How time grows with unknowns and with the wanted width; started by ``run.py``.

Warm, one run each: an L-shape, a comb of more and more teeth, a plan of more and more rooms, a longer and longer shore.
"""

import math
import time

from asking import ALL_ROUND, FREE, JSON, polygon
from plane_shapes import Ring, comb, rooms, shoreline

from service.processes.constants import warm
from service.processes.registry import PROCESSES

L_SHAPE: Ring = [(0, 0), (0, -1), (1, -1), (1, 1), (-1, 1), (-1, 0)]


def run(name: str, rings: list[Ring], boundary: list[JSON], tolerance: float) -> tuple[int, float]:
    """One line of the table; unknowns and seconds."""
    inputs = {
        "problem": {"domain": {"shape": polygon(*rings)}, "boundary": boundary},
        "tolerance": tolerance,
        "limits": {"seconds": 120.0},
    }
    process = PROCESSES["constants"]
    begun = time.perf_counter()
    result = process.run(process.accept(inputs), lambda percent, message, so_far: None)
    seconds = time.perf_counter() - begun
    ((_, value),) = result["constants"].items()
    last = result["history"][-1]
    width = math.inf if value["relative_width"] is None else value["relative_width"]
    print(
        f"{name:<24} {tolerance:8.0e} {seconds:9.3f} {width:9.1e} {result['mesh']['triangles']:9,} "
        f"{last['unknowns']:9,} {1e6 * seconds / last['unknowns']:9.1f} {last['level']:5} {last['order']:5}",
        flush=True,
    )
    return last["unknowns"], seconds


def main() -> None:
    """Prints the table."""
    warm()
    heads = ("seconds", "width", "triangles", "unknowns", "us/unknown")
    print(f"{'domain':<24} {'target':>8} " + " ".join(f"{head:>9}" for head in heads) + " level order")
    for exponent in range(2, 10):
        run("L-shape", [L_SHAPE], ALL_ROUND, 10.0**-exponent)
    for teeth in (5, 10, 20, 40, 80):
        run(f"comb, {teeth} teeth, free", [comb(teeth, 0.5 / teeth)], FREE, 1e-3)
    for count in (2, 4, 8):
        run(f"{count} x {count} rooms, free", rooms(count), FREE, 1e-3)
    for edges in (50, 100, 200, 400, 800):
        run(f"shoreline, {edges} edges", [shoreline(edges)], ALL_ROUND, 1e-3)


if __name__ == "__main__":
    main()
