"""Benchmarks as ratios within one run, so that they mean the same on any machine.

Run with ``python -m tests.benchmarks.run`` from the root of the project.
"""

from __future__ import annotations

import os
import subprocess
import sys
import time
from collections.abc import Callable
from pathlib import Path

os.environ.setdefault("OPENBLAS_NUM_THREADS", "1")  # as the command line does, before numpy is imported

import numpy as np
from scipy.optimize import root

from rulecheck.analysis.conditions import from_points
from rulecheck.analysis.equations import Equations
from rulecheck.analysis.network import build_network
from rulecheck.analysis.newton import iterate, power_off, solve
from rulecheck.analysis.values import Parameters, Values, compute_values, take
from rulecheck.design.load import load
from rulecheck.design.model import Design

ROOT = Path(__file__).parents[2]
CASES = ROOT / "tests" / "published" / "cases"
CONDITIONS = 1000
SLOW_POINTS = 20
REPEATS = 7
BARE_IMPORT = "import numpy, networkx, pydantic, tomli"


def best_time(action: Callable[[], object], repeats: int = REPEATS) -> float:
    """Shortest of several runs [s]."""
    times = []
    for _ in range(repeats):
        start = time.perf_counter()
        action()
        times.append(time.perf_counter() - start)
    return min(times)


def batch(design: Design, size: int) -> tuple[Equations, Values]:
    """Equations of a design and values at random inputs within its ranges."""
    rng = np.random.default_rng(1)
    columns = {n: np.exp(rng.uniform(np.log(s.low), np.log(s.high), size)) for n, s in design.inputs.items()}
    conditions = from_points(design, columns)
    network = build_network(design)
    values = compute_values(network, conditions, lambda _: conditions.values["ambient"], Parameters(design))
    return Equations(network), values


def newton_over_solve(design: Design) -> tuple[int, float]:
    """Unknowns, and the time of one Newton iteration over that of `numpy.linalg.solve` on its matrices."""
    equations, values = batch(design, CONDITIONS)
    solved = solve(equations, values)
    linear = equations.linear_matrix(values)
    residual, jacobian, _, _ = equations.evaluate(solved.x, solved.tangents, values, linear)
    bare = best_time(lambda: np.linalg.solve(jacobian, residual[..., None]))
    start = power_off(equations, CONDITIONS)
    few, many = 4, 8  # no condition arrives that early, so that all stay in the batch
    both = best_time(lambda: iterate(equations, values, start, many))
    one = best_time(lambda: iterate(equations, values, start, few))
    return equations.size, (both - one) / (many - few) / bare


def root_over_engine(design: Design) -> float:
    """Time a point of a loop over `scipy.optimize.root` with the same equations, over the engine's.

    The library gets the equations as a user of it would write them: a function of the unknowns, from a start
    beside the answer, since from farther away it does not arrive at all.
    """
    equations, values = batch(design, CONDITIONS)
    solved = solve(equations, values)
    engine = best_time(lambda: solve(equations, values)) / CONDITIONS
    rng = np.random.default_rng(2)

    def one_by_one() -> None:
        for i in range(SLOW_POINTS):
            here = take(values, slice(i, i + 1))
            linear = equations.linear_matrix(here)

            def residual(x: np.ndarray, here: Values = here, linear: np.ndarray = linear) -> np.ndarray:
                tangents = equations.junction_voltages(x[None], here)
                return equations.evaluate(x[None], tangents, here, linear)[0][0]

            root(residual, solved.x[i] * (1 + 1e-3 * rng.standard_normal(equations.size)))

    return best_time(one_by_one, 3) / SLOW_POINTS / engine


def run_time(*command: str) -> float:
    """Wall time of a command that succeeds [s]."""
    return best_time(lambda: subprocess.run(command, check=True, capture_output=True, cwd=ROOT), 5)


def start_up() -> tuple[float, float]:
    """Wall time of `rulecheck check` on a sound example over that of the bare imports: start-up part, and all."""
    bare = run_time(sys.executable, "-c", BARE_IMPORT)
    load_only = (
        "from rulecheck.design.load import load; import rulecheck.analysis.review; import rulecheck_rules; "
        "load('example_designs/sound/nozzle_flow.toml')"
    )
    ready = run_time(sys.executable, "-c", load_only)
    program = str(Path(sys.executable).with_name("rulecheck"))
    whole = run_time(program, "check", "example_designs/sound/nozzle_flow.toml")
    return ready / bare, whole / bare


def main() -> None:
    """Print the table."""
    rows = []
    for name in ("current_ratio", "cube_root"):
        unknowns, ratio = newton_over_solve(load(CASES / f"{name}.toml"))
        rows.append((f"Newton iteration / numpy.linalg.solve, {unknowns} unknowns", ratio, "2 or less"))
    rows.append(("loop of scipy.optimize.root / engine, a point", root_over_engine(load(CASES / "current_ratio.toml")),
                 "100 or more"))  # fmt: skip
    first, whole = start_up()
    rows.append(("start-up with a design loaded / bare imports", first, "2 or less"))
    rows.append(("whole `rulecheck check` of a sound example / bare imports", whole, "shown"))
    print("| benchmark | ratio | aim |\n| --- | --- | --- |")
    for words, ratio, aim in rows:
        print(f"| {words} | {ratio:.3g} | {aim} |")


if __name__ == "__main__":
    main()
