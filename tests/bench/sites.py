"""Networks made from a seed, on which diagnosis is judged: flows only, and a copper site.

Nothing here is a real plant. Ranges of every draw are constants, printed with the results.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from recon.flowsheet.balances import Amount
from recon.flowsheet.network import MASS, Flowsheet, Node, Stream
from recon.reconcile.problem import Measurement, MeasurementKind, Part, Problem
from tests.networks import network

if TYPE_CHECKING:
    from numpy.typing import NDArray

    Vector = NDArray[np.float64]

FLOW_U = 0.025
"""Relative standard uncertainty of every meter of a network of flows."""
SMALLEST_FLOW = 0.004
"""No stream of a generated network carries less than this share of the largest."""

OUTSIDE = 3
"""The outside is drawn as a stream's end as often as so many nodes."""

RECYCLE_ENDS = {
    "1": (None, "A"),
    "2": ("A", "B"),
    "3": ("B", "C"),
    "4": ("C", "D"),
    "5": ("C", "A"),
    "6": ("D", None),
    "7": ("D", "B"),
}
"""A small process with two recycles, invented here."""


@dataclass(frozen=True, kw_only=True)
class Case:
    """A network with its true amounts, every reading true."""

    name: str
    problem: Problem
    amounts: dict[Amount, float]


def flow_network(
    random: np.random.Generator, *, streams: int, nodes: int, name: str, most_alike: float = 1.0
) -> Case:
    """
    Draw a meshed network of flows, every one metered, no node with fewer than three streams.

    Ends are drawn at random, the outside as often as ``OUTSIDE`` nodes; a draw is kept if
    everything is fed and drained, no stream is smaller than ``SMALLEST_FLOW`` of the largest, and
    no two meters that can be told apart have a cosine above ``most_alike``. Splits at a node are
    Dirichlet(1.2).
    """
    while True:
        ends = _ends(random, streams, nodes)
        if ends is None:
            continue
        sheet = network(ends)
        flows = _flows(sheet, random)
        if flows is None or flows.min() < SMALLEST_FLOW * flows.max():
            continue
        if most_alike >= 1.0 or _most_alike(sheet, flows) <= most_alike:
            return _metered(name, sheet, flows)


def _most_alike(sheet: Flowsheet, flows: Vector) -> float:
    """Largest cosine of two meters' signatures, exact pairs left out."""
    node = {n.name: i for i, n in enumerate(sheet.nodes)}
    A = np.zeros((len(node), len(flows)))
    for j, s in enumerate(sheet.streams):
        if s.target is not None:
            A[node[s.target], j] += 1.0
        if s.source is not None:
            A[node[s.source], j] -= 1.0
    A = A * flows
    G = np.linalg.solve(np.linalg.cholesky(A @ A.T), A)
    G = G / np.linalg.norm(G, axis=0)
    cosine = np.abs(np.triu(G.T @ G, 1))
    return float(cosine[cosine < 1 - 1e-7].max())


def small_recycle(random: np.random.Generator) -> Case:
    """Give the seven-stream process with two recycles, with splits of its own."""
    sheet = network(RECYCLE_ENDS)
    flows = None
    while flows is None or flows.min() < 0.1 * flows.max():
        flows = _flows(sheet, random)
    return _metered("seven streams, two recycles", sheet, flows)


def _ends(
    random: np.random.Generator, streams: int, nodes: int
) -> dict[str, tuple[str | None, str | None]] | None:
    pairs: set[tuple[int, int]] = set()
    outside = nodes
    while len(pairs) < streams:
        a, b = (min(int(v), outside) for v in random.integers(nodes + OUTSIDE, size=2))
        if a != b and (b, a) not in pairs:
            pairs.add((a, b))
    degree = np.zeros(nodes + 1, dtype=int)
    for a, b in pairs:
        degree[a] += 1
        degree[b] += 1
    if degree[:nodes].min() < 3 or degree[:nodes].max() > 7:
        return None
    if not (
        _reached(pairs, outside, nodes) and _reached({(b, a) for a, b in pairs}, outside, nodes)
    ):
        return None
    name = [f"n{k + 1}" for k in range(nodes)]
    return {
        f"s{i + 1}": (
            None if a == outside else name[a],
            None if b == outside else name[b],
        )
        for i, (a, b) in enumerate(sorted(pairs))
    }


def _reached(pairs: set[tuple[int, int]], start: int, nodes: int) -> bool:
    seen, fresh = {start}, {start}
    while fresh:
        fresh = {b for a, b in pairs if a in fresh} - seen
        seen |= fresh
    return len(seen) == nodes + 1


def _flows(sheet: Flowsheet, random: np.random.Generator) -> Vector | None:
    names = [s.name for s in sheet.streams]
    matrix, right = np.eye(len(names)), np.zeros(len(names))
    split: dict[str, float] = {}
    for node in sheet.nodes:
        leaving = sheet.leaving(node.name)
        shares = random.dirichlet(np.full(len(leaving), 1.2))
        split.update({s.name: float(v) for s, v in zip(leaving, shares, strict=True)})
    for i, stream in enumerate(sheet.streams):
        if stream.source is None:
            right[i] = float(random.uniform(50.0, 500.0))
            continue
        for feeder in sheet.entering(stream.source):
            matrix[i, names.index(feeder.name)] -= split[stream.name]
    if abs(np.linalg.det(matrix)) < 1e-6:
        return None
    return np.asarray(np.linalg.solve(matrix, right))


def _metered(name: str, sheet: Flowsheet, flows: Vector) -> Case:
    amounts = {Amount(1, s.name, MASS): float(v) for s, v in zip(sheet.streams, flows, strict=True)}
    return Case(
        name=name,
        problem=Problem(
            flowsheets=(sheet,),
            measurements=tuple(
                Measurement(
                    name=f"F-{unknown.stream}",
                    period=1,
                    kind=MeasurementKind.METER,
                    parts=(Part(of=((unknown, 1.0),)),),
                    value=value,
                    u=FLOW_U * value,
                )
                for unknown, value in amounts.items()
            ),
        ),
        amounts=amounts,
    )


# ------------------------------------------------------------------------- an invented copper site
SPECIES = ("Cu", "Fe", "S", "SiO2")
ALL = (MASS, *SPECIES)
Shares = dict[str, dict[str, tuple[float | None, ...]]]
CONCENTRATING: Shares = {
    # node: {stream leaving: share of Cu, Fe, S, SiO2, rest}
    "blend": {"MILL": (1, 1, 1, 1, 1)},
    "rougher": {"ROCON": (0.80, 0.14, 0.35, 0.03, 0.03), "ROTAIL": (0.20, 0.86, 0.65, 0.97, 0.97)},
    "scavenger": {"SCON": (0.55, 0.08, 0.30, 0.02, 0.02), "STAIL": (0.45, 0.92, 0.70, 0.98, 0.98)},
    "regrind": {"RGFEED": (1, 1, 1, 1, 1)},
    "cleaner": {"CLCON": (0.86, 0.60, 0.72, 0.22, 0.22), "CLTAIL": (0.14, 0.40, 0.28, 0.78, 0.78)},
    "recleaner": {"CONC": (0.88, 0.72, 0.80, 0.45, 0.45), "RTAIL": (0.12, 0.28, 0.20, 0.55, 0.55)},
    "cleaner scavenger": {
        "CSCON": (0.70, 0.35, 0.45, 0.15, 0.15),
        "CSTAIL": (0.30, 0.65, 0.55, 0.85, 0.85),
    },
    "tails": {"FINTAIL": (1, 1, 1, 1, 1)},
    "filter": {"CAKE": (1, 1, 1, 1, 1)},
    "bedding": {"CHARGE": (1, 1, 1, 1, 1)},
    "slag plant": {
        "SLCON": (0.80, 0.10, 0.70, 0.08, 0.10),
        "SLTAIL": (0.20, 0.90, 0.30, 0.92, 0.90),
    },
}
MELTING: Shares = {
    "furnace": {
        "MATTE": (0.955, 0.33, 0.55, 0.01, None),
        "SLAG": (0.030, 0.64, 0.02, 0.965, None),
        "GAS-F": (0, 0, 0.42, 0, None),
        "DUST-F": (0.015, 0.03, 0.01, 0.025, None),
    },
    "converter": {
        "BLISTER": (0.955, 0.002, 0.002, 0.004, None),
        "CSLAG": (0.035, 0.990, 0.018, 0.966, None),
        "GAS-C": (0, 0, 0.975, 0, None),
        "DUST-C": (0.010, 0.008, 0.005, 0.03, None),
    },
    "anode furnace": {
        "ANODES": (0.993, 0.10, 0.10, 0.1, None),
        "ASLAG": (0.007, 0.90, 0.90, 0.9, None),
    },
}
"""Smelting nodes: dry mass is not conserved there; the rest of a stream is a share of its mass."""
REST = {
    "MATTE": 0.02, "SLAG": 0.25, "DUST-F": 0.30, "BLISTER": 0.010, "CSLAG": 0.24, "DUST-C": 0.3,
    "ANODES": 0.006, "ASLAG": 0.35,
}  # fmt: skip
TARGETS = {
    "MILL": "rougher", "ROCON": "regrind", "ROTAIL": "scavenger", "SCON": "regrind",
    "STAIL": "tails", "RGFEED": "cleaner", "CLCON": "recleaner", "CLTAIL": "cleaner scavenger",
    "CONC": "filter", "RTAIL": "cleaner", "CSCON": "regrind", "CSTAIL": "tails", "CAKE": "bedding",
    "CHARGE": "furnace", "MATTE": "converter", "SLAG": "slag plant", "SLCON": "bedding",
    "BLISTER": "anode furnace", "CSLAG": "furnace", "DUST-C": "furnace", "ASLAG": "converter",
}  # fmt: skip
FEEDS = {
    # stream: node, t/d, Cu, Fe, S, SiO2
    "ORE-A": ("blend", 17_000.0, 0.0095, 0.045, 0.024, 0.58),
    "ORE-B": ("blend", 9_000.0, 0.0065, 0.038, 0.016, 0.64),
    "PURCH": ("bedding", 420.0, 0.270, 0.270, 0.310, 0.070),
    "FLUX": ("bedding", 160.0, 0.001, 0.020, 0.001, 0.900),
    "FLUX-C": ("converter", 70.0, 0.001, 0.020, 0.001, 0.920),
    "SCRAP": ("converter", 35.0, 0.990, 0.002, 0.001, 0.001),
}
GASES = ("GAS-F", "GAS-C")
TILT = 0.06
"""Every share of a species is multiplied by a normal factor of this relative width, then closed."""
FLOW_RANGE, ASSAY_RANGE, GAS_RANGE = (0.008, 0.03), (0.012, 0.05), (0.04, 0.08)
"""Relative standard uncertainties drawn, log-uniform: solids flows, assays, gas sulfur."""
FLOWS_METERED, ASSAYS_TAKEN = 0.80, 0.80
"""Shares of flows and assays measured; what enters the site is always weighed."""


def copper_site(random: np.random.Generator) -> Case:
    """Draw an invented copper site for one day: 14 nodes, 33 streams, four components."""
    amounts = _copper_amounts(random)
    sheet = _copper_sheet()
    readings: list[Measurement] = []
    for stream in sheet.streams:
        for quantity in stream.carries:
            gas = stream.name in GASES
            sure = gas or (quantity == MASS and stream.source is None)
            share = 1.0 if sure else FLOWS_METERED if quantity == MASS else ASSAYS_TAKEN
            if random.random() > share:
                continue
            unknown = Amount(1, stream.name, quantity)
            flow = quantity == MASS or gas
            span = GAS_RANGE if gas else FLOW_RANGE if flow else ASSAY_RANGE
            over = None if flow else ((unknown._replace(quantity=MASS), 1.0),)
            value = amounts[unknown] / (1.0 if flow else amounts[unknown._replace(quantity=MASS)])
            readings.append(
                Measurement(
                    name=f"{stream.name} {quantity}",
                    period=1,
                    kind=MeasurementKind.METER if flow else MeasurementKind.ASSAY,
                    parts=(Part(of=((unknown, 1.0),), over=over),),
                    value=value,
                    u=value * float(np.exp(random.uniform(np.log(span[0]), np.log(span[1])))),
                    sampler=None if flow else f"{stream.name} sampler",
                )
            )
    return Case(
        name="copper site",
        problem=Problem(flowsheets=(sheet,), measurements=tuple(readings)),
        amounts=amounts,
    )


def _copper_sheet() -> Flowsheet:
    leaving = {**CONCENTRATING, **MELTING}
    streams = [
        Stream(name=name, source=None, target=feed[0], carries=ALL) for name, feed in FEEDS.items()
    ]
    for node, shares in leaving.items():
        streams += [
            Stream(
                name=name,
                source=node,
                target=TARGETS.get(name),
                carries=("S",) if name in GASES else ALL,
            )
            for name in shares
        ]
    return Flowsheet(
        quantities=ALL,
        nodes=tuple(
            Node(name=node, conserves=ALL if node in CONCENTRATING else SPECIES[: _kept(node)])
            for node in leaving
        ),
        streams=tuple(streams),
    )


def _kept(node: str) -> int:
    """Only copper is balanced around the anode furnace."""
    return 1 if node == "anode furnace" else len(SPECIES)


def _copper_amounts(random: np.random.Generator) -> dict[Amount, float]:
    leaving = {**CONCENTRATING, **MELTING}
    names = [*FEEDS, *(s for shares in leaving.values() for s in shares)]
    entering: dict[str, list[str]] = {}
    for name in names:
        target = FEEDS[name][0] if name in FEEDS else TARGETS.get(name)
        if target is not None:
            entering.setdefault(target, []).append(name)
    feed_rate = {name: float(random.uniform(0.85, 1.15)) for name in FEEDS}
    result: dict[Amount, float] = {}
    for k, quantity in enumerate((*SPECIES, "rest")):
        matrix, right = np.eye(len(names)), np.zeros(len(names))
        for name, feed in FEEDS.items():
            grades = feed[2:]
            share = 1 - sum(grades) if quantity == "rest" else grades[k]
            right[names.index(name)] = feed_rate[name] * feed[1] * share
        for node, shares in leaving.items():
            if quantity == "rest" and node in MELTING:
                for name in shares:
                    solid = sum(result.get(Amount(1, name, q), 0.0) for q in SPECIES)
                    right[names.index(name)] = solid * REST.get(name, 0) / (1 - REST.get(name, 0))
                continue
            drawn = {
                name: float(v[k] or 0.0) * float(np.exp(TILT * random.standard_normal()))
                for name, v in shares.items()
            }
            whole = sum(drawn.values())
            for name, share in drawn.items():
                for feeder in entering[node]:
                    matrix[names.index(name), names.index(feeder)] -= share / whole
        found = np.linalg.solve(matrix, right)
        result.update({Amount(1, n, quantity): float(v) for n, v in zip(names, found, strict=True)})
    for name in names:
        result[Amount(1, name, MASS)] = sum(result[Amount(1, name, q)] for q in (*SPECIES, "rest"))
        del result[Amount(1, name, "rest")]
    return result
