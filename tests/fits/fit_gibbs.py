"""Fit the rows of `` that rest on open tables; every other row is left as it is.

``gibbs_choice.csv`` names the phases: a table of the NIST-JANAF collection (package ``janaf``) or a
polynomial of the NASA collection (files of ``cantera``). Run ``python tests/fits/fit_gibbs.py`` to refit.

Each phase is fitted in G = H - T S by least squares to the classical heat capacity Cp = a + bT + c/T^2 +
dT^2; a piece that starts at 298.15 K keeps the H298 and S298 of its table. A range that cannot be met
within AIM is cut in two at the best place. The spread of a row is at least the floor of its class, and
0.7 of the widest disagreement in G among JANAF, NASA and the CRC value at 298.15 K (two sources that
differ by D have a standard deviation of D / sqrt 2).

References
----------
M. W. Chase, NIST-JANAF Thermochemical Tables, 4th ed., J. Phys. Chem. Ref. Data Monograph 9 (1998).
B. J. McBride, S. Gordon, M. A. Reno, NASA TM-4513 (1993).
"""

from __future__ import annotations

import csv
import sys
from collections.abc import Iterator, Mapping
from functools import lru_cache
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]
Row = dict[str, str]

HERE = Path(__file__).resolve().parent
TABLE = HERE.parents[1] / "purity" / "data" / "gibbs.csv"
CHOICE = HERE / "gibbs_choice.csv"
T_REF = 298.15
#: Sources of the rows that are fitted here.
FITTED = ("SUB-JANAF", "SUB-NASA")
#: Worst error in G that a piece may have before it is cut, J/mol, and the shortest piece, points.
AIM = 25.0
SHORTEST = 5
#: Error at which no further term of Cp is added, J/mol: fewer terms continue better beyond the table.
ENOUGH = 5.0
#: Least spread of a class, J/mol.
FLOOR = {"element": 200.0, "gas": 500.0, "oxide": 1500.0, "chloride": 1500.0, "fluoride": 1500.0}
OTHER = 2500.0
#: Coefficients in the order in which they are called for; no c/T^2 where nothing holds it at 298.15 K.
PINNED = ((2,), (2, 3), (2, 3, 4), (2, 3, 4, 5))
FREE = ((0, 1, 2), (0, 1, 2, 3))
COLUMNS = [
    *("formula", "state", "label", "class"),
    *("H298_J_per_mol", "S298_J_per_mol_K", "a_J_per_mol_K", "b_J_per_mol_K2", "c_J_K_per_mol"),
    *("d_J_per_mol_K3", "fit_error_J_per_mol", "T_min_K", "T_max_K", "spread_J_per_mol"),
    *("rank", "source", "where", "origin", "note"),
]


def basis(T: Array) -> Array:
    """Columns H298, S298, a, b, c, d of G(T); (n, 6)."""
    r = T_REF
    return np.stack(
        [
            np.ones_like(T),
            -T,
            T - r - T * np.log(T / r),
            (T**2 - r**2) / 2 - T * (T - r),
            -(1 / T - 1 / r) + T * (T**-2 - r**-2) / 2,
            (T**3 - r**3) / 3 - T * (T**2 - r**2) / 2,
        ],
        axis=1,
    )


def heat_capacity(answer: Array, T: Array) -> Array:
    """Cp = a + bT + c/T^2 + dT^2."""
    a, b, c, d = answer[2:]
    return np.asarray(a + b * T + c / T**2 + d * T**2)


@lru_cache(maxsize=1)
def nasa() -> Mapping[str, Any]:
    """Species of the NASA collection by name."""
    import cantera as ct

    return {
        s.name: s
        for name in ("nasa_condensed.yaml", "nasa_gas.yaml")
        for s in ct.Species.list_from_file(name)
    }


def nasa_gibbs(names: str, T: Array) -> Array:
    """G of the most stable of some NASA species, J/mol; NaN where none is valid."""
    best = np.full(T.shape, np.nan)
    for name in filter(None, names.split(";")):
        thermo = nasa()[name].thermo
        for j, t in enumerate(T):
            if thermo.min_temp - 2 <= t <= thermo.max_temp:
                best[j] = np.fmin(best[j], (thermo.h(t) - t * thermo.s(t)) / 1000)
    return best


@lru_cache(maxsize=512)
def janaf_points(index: str) -> tuple[Array, Array, float, float]:
    """T and G of a JANAF table, and its H298 and S298 (J, mol, K)."""
    from janaf import Table

    frame = (
        Table(index).df.select("T(K)", "-[G-H(Tr)]/T", "delta-f H", "S").drop_nulls(["T(K)", "-[G-H(Tr)]/T"])
    )
    T, free, dfH, S = (np.array(frame[name].to_list(), float) for name in frame.columns)
    T, free, dfH, S = (column[T > 0] for column in (T, free, dfH, S))
    at = int(np.argmin(np.abs(T - T_REF)))
    H298 = 1000 * dfH[at]
    keep = (T >= T_REF) & np.isfinite(free)
    first = np.unique(T[keep], return_index=True)[1]
    return T[keep][first], (H298 - T * free)[keep][first], H298, S[at]


def points(choice: Row) -> tuple[Array, Array, Array]:
    """T, G and the pinned (H298, S298), empty where the table does not reach 298.15 K."""
    kind, name = choice["table"].split(":", 1)
    if kind == "janaf":
        T, G, H298, S298 = janaf_points(name)
        pin = np.array([H298, S298]) if T[0] == T_REF else np.array([])
    else:
        thermo = nasa()[name].thermo
        T = np.append(T_REF, np.arange(300, thermo.max_temp + 1, 50.0))
        G = nasa_gibbs(name, T)
        pin = np.array([thermo.h(T_REF), thermo.s(T_REF)]) / 1000
    keep = float(choice["T_max_K"]) >= T
    return T[keep], G[keep], pin


def solve(T: Array, G: Array, pin: Array) -> tuple[Array, float]:
    """Six coefficients and the worst error; no more terms of Cp than the table asks for."""
    columns = basis(T)
    target = G - columns[:, :2] @ pin if len(pin) else G
    best, least = np.zeros(6), np.inf
    for terms in (PINNED if len(pin) else FREE)[: max(1, len(T) - 3)]:
        free = list(terms)
        scale = np.abs(columns[:, free]).max(axis=0)
        answer = np.zeros(6)
        answer[: len(pin)] = pin
        answer[free] = np.linalg.lstsq(columns[:, free] / scale, target, rcond=1e-13)[0] / scale
        error = float(np.abs(columns @ answer - G).max())
        if error < least and (least == np.inf or heat_capacity(answer, T).min() > 0):
            best, least = answer, error
        if least <= ENOUGH:
            break
    return best, least


def pieces(T: Array, G: Array, pin: Array) -> Iterator[tuple[Array, Array, float]]:
    """Pieces (T, coefficients, worst error) that meet the aim, cut where the worst error is least."""
    answer, error = solve(T, G, pin)
    if error <= AIM or len(T) < 2 * SHORTEST:
        yield T, answer, error
        return
    none = np.array([])

    def worst(cut: int) -> float:
        return max(solve(T[: cut + 1], G[: cut + 1], pin)[1], solve(T[cut:], G[cut:], none)[1])

    cut = min(range(SHORTEST - 1, len(T) - SHORTEST + 1), key=worst)
    yield from pieces(T[: cut + 1], G[: cut + 1], pin)
    yield from pieces(T[cut:], G[cut:], none)


def spread(choice: Row, T: Array, G: Array) -> tuple[float, str]:
    """One sigma and the reason for it."""
    found = [(FLOOR.get(choice["class"], OTHER), "least spread of the class")]
    if choice["least_spread_J_per_mol"]:
        found.append((float(choice["least_spread_J_per_mol"]), choice["note"]))
    other = nasa_gibbs(choice["nasa"], T)
    if np.isfinite(other).any():
        found.append((0.7 * float(np.nanmax(np.abs(other - G))), "NASA polynomial differs"))
    if choice["crc_dGf298_J_per_mol"] and choice["table"].startswith("janaf:"):
        from janaf import Table

        frame = Table(choice["table"].split(":")[1]).df
        dfG = 1000 * float(frame.filter(frame["T(K)"] == T_REF)["delta-f G"][0])
        found.append(
            (0.7 * abs(dfG - float(choice["crc_dGf298_J_per_mol"])), "CRC value at 298.15 K differs")
        )
    return max(found)


def fit(choice: Row) -> list[Row]:
    """Rows of gibbs.csv for one chosen table."""
    T, G, pin = points(choice)
    sigma, reason = spread(choice, *together(choice, T, G))
    kind, name = choice["table"].split(":", 1)
    done = list(pieces(T, G, pin))
    rows: list[Row] = []
    label = choice["label"]
    for piece, answer, error in done:
        name_of = "table" if kind == "janaf" else "species"
        rows.append(
            dict.fromkeys(COLUMNS, "")
            | {key: choice[key] for key in ("formula", "state", "class")}
            | dict(zip(COLUMNS[4:10], (f"{x:.9g}" for x in answer), strict=True))
            | {
                "label": f"{label} {piece[0]:g}-{piece[-1]:g} K".strip() if len(done) > 1 else label,
                "fit_error_J_per_mol": f"{error:.3g}",
                "T_min_K": f"{piece[0]:g}",
                "T_max_K": f"{piece[-1]:g}",
                "spread_J_per_mol": f"{sigma:.3g}",
                "source": FITTED[0] if kind == "janaf" else FITTED[1],
                "where": f"{name_of} {name}",
                "origin": "looked-up",
                "note": f"fit to the table; spread: {reason}",
            }
        )
    return rows


def together(choice: Row, T: Array, G: Array) -> tuple[Array, Array]:
    """T and the lowest G of all polymorphs of a choice, so that NASA's most stable form has its like."""
    for other in choices():
        same = (other["formula"], other["state"]) == (choice["formula"], choice["state"])
        if same and other is not choice:
            T2, G2, _ = points(other)
            G = np.fmin(G, np.interp(T, T2, G2, left=np.nan, right=np.nan))
    return T, G


@lru_cache(maxsize=1)
def choices() -> tuple[Row, ...]:
    with CHOICE.open(newline="", encoding="utf-8") as file:
        return tuple(csv.DictReader(file))


def read(path: Path = TABLE) -> list[Row]:
    with path.open(newline="", encoding="utf-8") as file:
        return list(csv.DictReader(file))


def main() -> None:
    others = (
        [row for row in read() if row["origin"] == "derived" or row["source"] not in FITTED]
        if TABLE.exists()
        else []
    )
    rows = [row for choice in choices() for row in fit(choice)] + others
    rows.sort(key=lambda row: (row["formula"], row["state"], float(row["T_min_K"]), row["label"]))
    with TABLE.open("w", newline="", encoding="utf-8") as file:
        writer = csv.DictWriter(file, COLUMNS, lineterminator="\n")
        writer.writeheader()
        writer.writerows(rows)
    worst = sorted(rows, key=lambda row: -float(row["fit_error_J_per_mol"] or 0))[:12]
    for row in worst:
        sys.stdout.write(f"{row['formula']} {row['state']} {row['label']} {row['fit_error_J_per_mol']} J\n")
    sys.stdout.write(f"{len(rows)} rows\n")


if __name__ == "__main__":
    main()
