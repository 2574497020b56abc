"""The solver against 40-digit operating points (mpmath; generator: `oracle.py`, from physics.md 2 and 3)."""

from __future__ import annotations

import json
from pathlib import Path
from typing import Any

import pytest

from biasband.circuit.solution import Status
from circuit.stages import Case, real

ROWS: dict[str, dict[str, Any]] = json.loads(
    Path(__file__).with_name("oracle_values.json").read_text(encoding="utf-8")
)

NEWTON = 2e-9
"""[V] The solver stops at residuals below 1e-9 V; a terminal sees two of them."""

SETTLED = 1e-6
"""[K] The junction temperature is solved until it moves less than this (physics.md section 2)."""

WARM = 5e-8
"""[V] 1e-6 K of junction temperature moves these stages' nodes by up to some 40 mV/K."""


def case_of(row: dict[str, Any]) -> Case:
    """The case that an oracle row describes."""
    figures = {key: float(text) for key, text in row["transistor"].items() if text not in (None, "bandgap")}
    drift = figures.pop("drift", None)
    return Case(
        topology=row["topology"],
        polarity=row["polarity"],
        supply=float(row["V+"]),
        negative_supply=float(row.get("V-", "0")),
        temperature=float(row["T"]),
        resistances={name: float(text) for name, text in row["R"].items()},
        leakage=figures.pop("leakage"),
        transistor=real(
            figures.pop("gain"),
            figures.pop("vbe"),
            base_emitter_drift=drift,
            leakage_doubling=figures.pop("doubling"),
            **figures,
        ),
    )


@pytest.mark.parametrize("name", ROWS)
def test_operating_point_is_that_of_forty_digits(name: str) -> None:
    case, answer = case_of(ROWS[name]), {key: float(text) for key, text in ROWS[name]["answer"].items()}
    reading = case.reading()
    assert reading.point.status[0] == Status.SOLVED
    volts = WARM if case.transistor.thermal_resistance else NEWTON
    for quantity in ("base_voltage", "collector_voltage", "emitter_voltage", "collector_emitter_voltage"):
        assert case.value(quantity) == pytest.approx(answer[quantity], abs=volts), quantity
    assert reading.point.base_emitter[0] == pytest.approx(answer["base_emitter"], abs=volts)
    assert case.value("junction_temperature") == pytest.approx(answer["junction_temperature"], abs=SETTLED)
    # Currents follow the nodes through the smallest resistor at hand, some 300 Ω.
    for quantity in ("base_current", "collector_current"):
        assert case.value(quantity) == pytest.approx(answer[quantity], abs=volts / 300.0, rel=1e-7), quantity


def test_oracle_covers_every_topology_in_both_polarities_or_says_which() -> None:
    seen = {(row["topology"], row["polarity"]) for row in ROWS.values()}
    topologies = {"base-resistor", "collector-feedback", "divider", "split-supply", "follower"}
    assert seen == {(name, polarity) for name in topologies for polarity in ("npn", "pnp")}


def test_frozen_file_is_what_the_generator_writes() -> None:
    pytest.importorskip("mpmath", reason="the generator alone needs mpmath")
    from circuit import oracle

    assert ROWS.keys() == oracle.CASES.keys()
    for name in ("divider, saturated", "split supply, PNP, band-gap drift, hot"):
        assert oracle.answer(oracle.CASES[name]) == ROWS[name]["answer"]
