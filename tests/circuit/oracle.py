"""Generator of `oracle_values.json`: operating points to 40 digits, by mpmath alone.

Written from physics.md sections 2 and 3, not from the package: Kirchhoff's current law at every
free node of the raw network, in real voltages, with the junction temperature as one more unknown;
Newton's method in 60 digits from a hand estimate, heated gradually so that the fixed point found is
the lowest. Run as `python tests/circuit/oracle.py` to write the file anew.
"""

from __future__ import annotations

import json
from pathlib import Path
from typing import Any

import mpmath as mp  # type: ignore[import-untyped]

DIGITS, WORKING_DIGITS = 40, 60
FILE = Path(__file__).with_name("oracle_values.json")

BRANCHES = {
    "base-resistor": "RB V+ B, RC V+ C, RE E 0",
    "collector-feedback": "RB C B, R2 B 0, RC V+ C, RE E 0",
    "divider": "R1 V+ B, R2 B 0, RC V+ C, RE E 0",
    "split-supply": "RB B 0, RC V+ C, RE E V-",
    "follower": "R1 V+ B, R2 B 0, RE E 0",
}

PLAIN = {"gain": "260", "vbe": "0.64", "test_current": "1.5e-3", "test_voltage": "6", "gain_drift": "5e-3",
         "drift": "-2e-3", "leakage": "0", "doubling": "10", "reverse_gain": "4"}  # fmt: skip
FULL = {**PLAIN, "early_voltage": "70", "leakage": "40e-9", "thermal_resistance": "280"}
BANDGAP = {**FULL, "drift": "bandgap", "thermal_resistance": None}

# `start` is a hand estimate of (V_BE, V_CE, I_C): only where Newton's method begins.
CASES: dict[str, dict[str, Any]] = {
    "base resistor, 25 °C": {
        "topology": "base-resistor", "polarity": "npn", "V+": "12", "T": "298.15", "transistor": FULL,
        "R": {"RB": "1.1e6", "RC": "2.2e3", "RE": "330"}, "start": ["0.64", "5", "2.5e-3"],
    },
    "base resistor, emitter grounded, PNP, hot": {
        "topology": "base-resistor", "polarity": "pnp", "V+": "12", "T": "358.15", "transistor": FULL,
        "R": {"RB": "2.2e6", "RC": "1.5e3"}, "start": ["0.54", "5", "4e-3"],
    },
    "collector feedback, cold": {
        "topology": "collector-feedback", "polarity": "npn", "V+": "9", "T": "233.15", "transistor": FULL,
        "R": {"RB": "680e3", "RC": "4.7e3"}, "start": ["0.77", "5", "1e-3"],
    },
    "collector feedback, every resistor, PNP": {
        "topology": "collector-feedback", "polarity": "pnp", "V+": "9", "T": "323.15", "transistor": FULL,
        "R": {"RB": "150e3", "R2": "39e3", "RC": "3.3e3", "RE": "470"}, "start": ["0.6", "4", "1.2e-3"],
    },
    "divider, hot": {
        "topology": "divider", "polarity": "npn", "V+": "9", "T": "348.15", "transistor": FULL,
        "R": {"R1": "68e3", "R2": "13e3", "RC": "3.3e3", "RE": "1e3"}, "start": ["0.55", "5", "0.9e-3"],
    },
    "divider, emitter resistor in two, PNP, band-gap drift, cold": {
        "topology": "divider", "polarity": "pnp", "V+": "9", "T": "243.15", "transistor": BANDGAP,
        "R": {"R1": "68e3", "R2": "13e3", "RC": "3.3e3", "RE1": "120", "RE2": "820"},
        "start": ["0.74", "5", "0.7e-3"],
    },
    "divider, saturated": {
        "topology": "divider", "polarity": "npn", "V+": "9", "T": "298.15", "transistor": FULL,
        "R": {"R1": "68e3", "R2": "15e3", "RC": "18e3", "RE": "1e3"}, "start": ["0.65", "0.05", "0.45e-3"],
    },
    "divider, RC of two million ohm": {
        "topology": "divider", "polarity": "npn", "V+": "9", "T": "298.15", "transistor": PLAIN,
        "R": {"R1": "68e3", "R2": "13e3", "RC": "2e6", "RE": "1e3"}, "start": ["0.6", "0.01", "4e-6"],
    },
    "divider, cut off": {
        "topology": "divider", "polarity": "npn", "V+": "2", "T": "298.15", "transistor": FULL,
        "R": {"R1": "68e3", "R2": "13e3", "RC": "3.3e3", "RE": "1e3"}, "start": ["0.33", "2", "1e-8"],
    },
    "split supply": {
        "topology": "split-supply", "polarity": "npn", "V+": "9", "V-": "-9", "T": "298.15",
        "transistor": FULL,
        "R": {"RB": "22e3", "RC": "3.9e3", "RE": "8.2e3"}, "start": ["0.63", "5", "1e-3"],
    },
    "split supply, PNP, band-gap drift, hot": {
        "topology": "split-supply", "polarity": "pnp", "V+": "9", "V-": "-7", "T": "358.15",
        "transistor": {**BANDGAP, "thermal_resistance": "280"},
        "R": {"RB": "22e3", "RC": "3.9e3", "RE": "8.2e3"}, "start": ["0.52", "3", "1e-3"],
    },
    "follower": {
        "topology": "follower", "polarity": "npn", "V+": "12", "T": "298.15", "transistor": FULL,
        "R": {"R1": "47e3", "R2": "56e3", "RE": "2.2e3"}, "start": ["0.66", "6", "2.5e-3"],
    },
    "follower, PNP, warm from itself": {
        "topology": "follower", "polarity": "pnp", "V+": "24", "T": "323.15",
        "transistor": {**FULL, "thermal_resistance": "400"},
        "R": {"R1": "10e3", "R2": "12e3", "RE": "1.2e3"}, "start": ["0.6", "12", "9e-3"],
    },
}  # fmt: skip


class Problem:
    """One case: its raw network and its equations."""

    def __init__(self, case: dict[str, Any]) -> None:
        self.sign = mp.mpf(1 if case["polarity"] == "npn" else -1)
        self.device = {
            key: mp.mpf(text) for key, text in case["transistor"].items() if text not in (None, "bandgap")
        }
        self.bandgap = case["transistor"]["drift"] == "bandgap"
        self.ambient = mp.mpf(case["T"])
        self.rails = {"V+": mp.mpf(case["V+"]), "0": mp.mpf(0), "V-": mp.mpf(case.get("V-", "0"))}
        self.start = [mp.mpf(text) for text in case["start"]]
        swap: dict[str, str] = {}
        if case["polarity"] == "pnp":
            swap = {"V+": "V-", "V-": "V+"} if "V-" in case else {"V+": "0", "0": "V+"}
        ohms = {name: mp.mpf(text) for name, text in case["R"].items()}
        if "RE1" in ohms:
            ohms["RE"] = ohms["RE1"] + ohms["RE2"]
        rows = [row.split() for row in BRANCHES[case["topology"]].split(", ")]
        self.branches = [(ohms[name], swap.get(a, a), swap.get(b, b)) for name, a, b in rows if name in ohms]
        self.fixed = dict(self.rails)
        if case["topology"] == "follower":
            self.fixed["C"] = self.rails[swap.get("V+", "V+")]
        if "RE" not in ohms:
            self.fixed["E"] = self.rails[swap.get("0", "0")]
        self.free = [node for node in "BCE" if node not in self.fixed]

    def currents(self, v_be: Any, v_bc: Any, T: Any) -> tuple[Any, Any]:
        """I_B and I_C of physics.md section 2."""
        d = self.device
        T0 = mp.mpf("298.15")
        V_T = mp.mpf("1.380649e-23") * T / mp.mpf("1.602176634e-19")
        if self.bandgap:
            vbe = mp.mpf("1.11") * (1 - T / T0) + d["vbe"] * T / T0 - 3 * V_T * mp.log(T / T0)
        else:
            vbe = d["vbe"] + d["drift"] * (T - T0)
        V_A = d.get("early_voltage", mp.inf)
        early = 1 + (d["test_voltage"] - d["vbe"]) / V_A
        I_S = d["test_current"] / early * mp.exp(-vbe / V_T)
        beta = d["gain"] / early * (T / T0) ** (d["gain_drift"] * T0)
        I_CBO = d["leakage"] * mp.mpf(2) ** ((T - T0) / d["doubling"])
        forward, reverse = mp.exp(v_be / V_T), mp.exp(v_bc / V_T)
        back = I_S / d["reverse_gain"] * (reverse - 1)
        return (
            I_S / beta * (forward - 1) + back - I_CBO,
            I_S * (forward - reverse) * (1 - v_bc / V_A) - back + I_CBO,
        )

    def state(self, unknowns: Any) -> tuple[dict[str, Any], Any, Any, Any, Any, Any]:
        """Node voltages, V_BE, V_BC, I_B, I_C, T_j; the unknowns are the free nodes' voltages and T_j."""
        *volts, T = unknowns
        node = {**self.fixed, **dict(zip(self.free, volts, strict=True))}
        v_be, v_bc = self.sign * (node["B"] - node["E"]), self.sign * (node["B"] - node["C"])
        I_B, I_C = self.currents(v_be, v_bc, T)
        return node, v_be, v_bc, I_B, I_C, T

    def equations(self, share_of_heat: Any) -> Any:
        """Kirchhoff's current law at every free node [mA], and the junction temperature [K]."""

        def residuals(*unknowns: Any) -> list[Any]:
            node, v_be, v_bc, I_B, I_C, T = self.state(unknowns)
            leaving = {"B": self.sign * I_B, "C": self.sign * I_C, "E": -self.sign * (I_B + I_C)}
            for ohms, a, b in self.branches:
                amps = (node[a] - node[b]) / ohms
                leaving[a] = leaving.get(a, 0) + amps
                leaving[b] = leaving.get(b, 0) - amps
            power = (v_be - v_bc) * I_C + v_be * I_B
            R = self.device.get("thermal_resistance", mp.mpf(0))
            return [
                *(1000 * leaving[name] for name in self.free),
                self.ambient + share_of_heat * R * power - T,
            ]

        return residuals

    def first_guess(self) -> list[Any]:
        """The hand estimate as node voltages: E from the resistor that carries the current."""
        v_be, v_ce, I_C = self.start
        emitter = self.fixed.get("E")
        if emitter is None:
            ohms, _, rail = next(branch for branch in self.branches if branch[1] == "E")
            emitter = self.fixed[rail] + self.sign * ohms * I_C
        guess = {"E": emitter, "B": emitter + self.sign * v_be, "C": emitter + self.sign * v_ce}
        return [*(guess[name] for name in self.free), self.ambient]

    def solve(self) -> Any:
        """The operating point, heated in ten steps from ambient."""
        unknowns = self.first_guess()
        for tenths in range(11):
            unknowns = list(
                mp.findroot(
                    self.equations(mp.mpf(tenths) / 10), unknowns, tol=mp.mpf(10) ** -100, maxsteps=400
                )
            )
        return unknowns


def answer(case: dict[str, Any]) -> dict[str, str]:
    """The operating point of a case as 40-digit decimals: real node voltages, currents in conduction."""
    with mp.workdps(WORKING_DIGITS):
        problem = Problem(case)
        node, v_be, v_bc, I_B, I_C, T = problem.state(problem.solve())
        values = {
            "base_voltage": node["B"], "collector_voltage": node["C"], "emitter_voltage": node["E"],
            "base_emitter": v_be, "collector_emitter_voltage": v_be - v_bc, "base_current": I_B,
            "collector_current": I_C, "junction_temperature": T,
        }  # fmt: skip
        return {name: mp.nstr(number, DIGITS) for name, number in values.items()}


def main() -> None:
    """Write the file."""
    rows = {name: {**case, "answer": answer(case)} for name, case in CASES.items()}
    FILE.write_text(json.dumps(rows, indent=1, ensure_ascii=False) + "\n", encoding="utf-8")


if __name__ == "__main__":
    main()
