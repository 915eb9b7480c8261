"""Models with known answers, and the outside values to hold them against."""

import tomllib
from pathlib import Path

import numpy as np

from study.methods.problem import Problem

REFERENCE = tomllib.loads((Path(__file__).parents[1] / "references" / "sensitivity.toml").read_text("utf-8"))


def scalars(count: int) -> Problem:
    """Each scalar a source of its own."""
    return Problem(np.arange(count), count)


def sourced(*sizes: int) -> Problem:
    """Sources of the given numbers of scalars."""
    return Problem(np.repeat(np.arange(len(sizes)), sizes), len(sizes))


def outside_problem(problem: Problem) -> dict:
    """The same problem as the library wants it, on the unit cube."""
    names = [f"x{number}" for number in range(problem.n_scalars)]
    groups = [f"g{number}" for number in problem.group_of]
    return {"num_vars": len(names), "names": names, "bounds": [[0.0, 1.0]] * len(names), "groups": groups}


def ishigami(unit: np.ndarray, a: float, b: float) -> np.ndarray:
    x = np.pi * (2.0 * unit - 1.0)
    return np.sin(x[:, 0]) + a * np.sin(x[:, 1]) ** 2 + b * x[:, 2] ** 4 * np.sin(x[:, 0])


def g_function(unit: np.ndarray, a: np.ndarray) -> np.ndarray:
    return np.prod((np.abs(4.0 * unit - 2.0) + a) / (1.0 + a), axis=1)


def several(unit: np.ndarray) -> np.ndarray:
    """Six smooth measures (6, builds) of any number of scalars; far from zero, of very different sizes."""
    weights = np.random.default_rng(11).normal(size=(6, unit.shape[1]))
    linear = weights @ (unit.T - 0.5)
    return 1000.0 + np.array([1e-3, 1.0, 10.0, 0.1, 5.0, 1.0])[:, None] * (linear + 0.4 * linear**2)


def clutch_deg(errors: np.ndarray) -> np.ndarray:
    """Angle (1, n) of the overrunning clutch with errors (3, n) of a, c and e."""
    sizes = REFERENCE["clutch"]
    a, c, e = np.array([sizes["a_mm"], sizes["c_mm"], sizes["e_mm"]])[:, None] + errors
    return np.degrees(np.arccos((a + c) / (e - c)))[None]
