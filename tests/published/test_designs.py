"""Designs against the published ones.

Box and Hunter (1957), Annals of Mathematical Statistics 28, 195-241 (axial distances, orthogonal
blocks, uniform precision); Box and Behnken (1960), Technometrics 2, 455-475. Both from memory,
see checks.toml. Factorial fractions of resolution V or better: Box, Hunter and Hunter, Statistics
for Experimenters, table of two-level fractional designs (from memory).
"""

import csv
from itertools import combinations

import numpy as np
import pytest
from scipy.optimize import brentq

from support.plans import design_of, moments
from support.published import FOLDER, agrees, checks, columns

ROWS = list(
    csv.DictReader((FOLDER / "axial_distances.csv").read_text(encoding="utf-8").splitlines())
)


def _name(kind, row):
    half = " half" if row["factorial_part"] == "half" else ""
    return f"{kind} k={row['k']}{half}"


@pytest.mark.parametrize("row", ROWS, ids=lambda r: f"{r['k']}-{r['factorial_part']}")
def test_the_rotatable_distance(row):
    found = design_of(int(row["k"]), core=row["factorial_part"])
    assert found.kind.count("factorial") == int(row["factorial_points"])
    check = checks("axial_distances")[_name("rotatable alpha", row)]
    assert agrees(found.axial_distance, check)
    assert not agrees(found.axial_distance, check, spoiled=True)
    assert found.axial_distance == pytest.approx(check["recomputed"], abs=1e-12)


@pytest.mark.parametrize(
    "row", [r for r in ROWS if r["blocks"]], ids=lambda r: f"{r['k']}-{r['factorial_part']}"
)
def test_the_published_blocked_designs_are_built_and_orthogonal(row):
    k, n_blocks = int(row["k"]), int(row["blocks"])
    in_core = int(row["centre_points_in_factorial_blocks_total"])
    centre = (in_core // (n_blocks - 1), int(row["centre_points_in_axial_block"]))
    stated = {"core": row["factorial_part"], "blocks": n_blocks, "centre_runs": centre}
    found = design_of(k, axial="orthogonal-blocks", **stated)
    check = checks("axial_distances")[_name("orthogonal-blocking alpha", row)]
    assert agrees(found.axial_distance, check)
    assert not agrees(found.axial_distance, check, spoiled=True)
    assert _coupling(found) < 1e-12
    other = design_of(k, axial=found.axial_distance * 1.05, **stated)
    assert _coupling(other) > 1e-3


def _coupling(design):
    """Largest difference between the blocks' means of any second-order column."""
    matrix = moments(design.coded)
    means = [matrix[design.block == b].mean(axis=0) for b in range(design.n_blocks)]
    return np.ptp(means, axis=0).max()


@pytest.mark.parametrize(
    "row",
    [r for r in ROWS if r["uniform_precision_centre_points_printed"]],
    ids=lambda r: f"{r['k']}-{r['factorial_part']}",
)
def test_uniform_precision(row):
    k = int(row["k"])
    matrix = moments(design_of(k, core=row["factorial_part"], centre_runs=(0, 0)).coded)

    def excess(count):
        information = matrix.T @ matrix
        information[0, 0] += count
        # the source scales the factors so that the mean square of each is 1
        unit = np.sqrt(information[1, 1] / information[0, 0])
        at = moments(np.array([np.zeros(k), unit * np.eye(k)[0]]))
        centre, one = np.einsum("nq,qr,nr->n", at, np.linalg.inv(information), at)
        return one - centre

    root = brentq(excess, 0.5, 60)
    check = checks("axial_distances")[_name("uniform-precision centre points", row)]
    assert agrees(root, check)
    assert root == pytest.approx(check["recomputed"], rel=1e-9)


@pytest.mark.parametrize("k", [3, 4, 5])
def test_box_behnken_is_the_published_table(k):
    table = columns(f"box_behnken_{k}.csv")
    published = np.column_stack([table[f"x{j + 1}"] for j in range(k)])
    n_blocks = int(table["block"].max())
    count = int((np.abs(published).sum(axis=1) == 0).sum())
    found = design_of(
        k, design="box-behnken", blocks=n_blocks, centre_runs=(count // n_blocks,) * 2
    )
    for b in range(n_blocks):
        ours = sorted(map(tuple, found.coded[found.block == b]))
        assert ours == sorted(map(tuple, published[table["block"] == b + 1]))
    assert _coupling(found) < 1e-12
    known = checks(f"box_behnken_{k}")
    inverse = np.linalg.inv(moments(found.coded).T @ moments(found.coded))
    for name, place in (("1", 0), ("x1", 1), ("x1^2", 1 + k), ("x1*x2", 1 + 2 * k)):
        assert agrees(inverse[place, place], known[f"variance factor of coef {name}"])


@pytest.mark.parametrize(("k", "runs", "distance"), [(6, 48, 3), (7, 56, 3)])
def test_box_behnken_for_six_and_seven_factors(k, runs, distance):
    found = design_of(k, design="box-behnken", blocks=2, centre_runs=(3, 3))
    edges = found.coded[[kind != "centre" for kind in found.kind]]
    assert len(edges) == runs
    assert (np.abs(edges).sum(axis=1) == distance).all()
    assert (np.abs(edges).sum(axis=0) == runs * distance / k).all()
    assert _coupling(found) < 1e-12
    assert np.linalg.matrix_rank(moments(found.coded)) == (k + 1) * (k + 2) // 2


# runs and resolution of the smallest fractions that keep products of two factors apart
@pytest.mark.parametrize(
    ("k", "runs", "resolution"), [(5, 16, 5), (6, 32, 6), (7, 64, 7), (8, 64, 5)]
)
def test_the_smallest_core_of_resolution_five(k, runs, resolution):
    found = design_of(k)
    assert found.kind.count("factorial") == runs
    assert found.core.resolution == resolution


# resolution of the best fractions of two-level designs
@pytest.mark.parametrize(
    ("k", "core", "resolution"),
    [
        (4, "half", 4),
        (5, "quarter", 3),
        (6, "quarter", 4),
        (6, "eighth", 3),
        (7, "quarter", 4),
        (7, "eighth", 4),
        (7, "sixteenth", 3),
        (8, "eighth", 4),
        (8, "sixteenth", 4),
    ],
)
def test_the_resolution_of_two_level_fractions(k, core, resolution):
    found = design_of(k, design="two-level", core=core)
    assert found.core.resolution == resolution
    edges = found.coded[[kind != "centre" for kind in found.kind]]
    # the shortest product that is constant over the runs, counted from the runs themselves
    shortest = min(
        size
        for size in range(1, k + 1)
        for word in _words(k, size)
        if abs(edges[:, word].prod(axis=1).sum()) == len(edges)
    )
    assert shortest == resolution


def _words(k, size):
    return [list(word) for word in combinations(range(k), size)]


# common practice from the trade
@pytest.mark.parametrize(("k", "distance"), [(2, 1.41), (3, 1.68)])
def test_common_distances(k, distance):
    assert design_of(k).axial_distance == pytest.approx(distance, abs=0.005)
