"""The textbook's stability factors: how I_C answers leakage, V_BE and gain, for any bias network."""

from __future__ import annotations

from dataclasses import dataclass

from biasband.circuit.reading import Reading
from biasband.circuit.scenarios import Values


@dataclass(frozen=True)
class StabilityFactors:
    """The factors of N scenarios, and the gain β = (I_C − I_CO)/(I_B + I_CO) that they hold at.

    `leakage` is S(I_CO) = dI_C/dI_CO, `base_emitter` S(V_BE) = dI_C/dV_BE [A/V], `gain` S(β) =
    dI_C/dβ [A].
    """

    beta: Values
    leakage: Values
    base_emitter: Values
    gain: Values


def stability_factors(reading: Reading, *, leakage: Values = 0.0) -> StabilityFactors:
    """Differentiate the active region's I_C by leakage [A], V_BE and β, all else held.

    The network's first port, with `I_C = β·I_B + (β+1)·I_CO` put in, is one equation in I_C:

        V_BE = V_oc − z11·I_B − z12·I_C
        I_C  = [β·(V_oc − V_BE) + (β+1)·z11·I_CO] / D,        D = z11 + β·z12
        S(I_CO) = (β+1)·z11/D,   S(V_BE) = −β/D,   S(β) = z11·(I_B + I_CO)/D

    For a divider z11 = R_B + R_E and z12 = R_E, which makes S(I_CO) the textbook's
    (β+1)·(1 + R_B/R_E)/(β + 1 + R_B/R_E). `leakage` is the I_CO that flows at the point. V_BE counts as a
    constant, as the textbooks have it: the junction's own slope, V_T/I_C beside the emitter's resistance,
    is left out, and so is self-heating. β is what the point has, Early effect and temperature included.
    Valid where the transistor is active. Worked case: 470 k, 2.2 k, β 100, no RE: z12 = 0, S(I_CO) = 101.
    Source: Boylestad & Nashelsky, Electronic Devices and Circuit Theory, "Bias stabilization" (memory);
    Bell, Electronic Devices and Circuits, ex. 5-17.
    """
    z = reading.network.impedances
    driven = reading.quiet.base_current + leakage
    beta = (reading.quiet.collector_current - leakage) / driven
    D = z.z11 + beta * z.z12
    return StabilityFactors(beta, (beta + 1.0) * z.z11 / D, -beta / D, z.z11 * driven / D)
