"""Circuits at the edges of the theory: modes at infinity, at the origin and exactly on the axis, rigid coupling, high gain.

Each is a list of cards parted by `|` (nodes n1, n2, .. and 0); `singular` ones have det(G + s C) = 0 for all s. No count
stands here: the exact reference finds it.
"""

EDGE_CIRCUITS = {
    # Loops and cutsets of reactances: modes at infinity and at the origin.
    "inductor_loop": "L1 n1 0 1u|L2 n1 n2 2u|L3 n2 0 3u|R1 n1 0 50|C1 n2 0 1n",
    "inductor_loop_active": "L1 n1 0 1u|L2 n1 n2 2u|L3 n2 0 3u|R1 n1 0 50|C1 n2 0 1n|G1 n2 0 n1 0 -0.05",
    "inductor_cutset": "L1 n1 n2 1u|L2 n2 n3 2u|L3 n2 0 1u|R1 n1 0 50|R2 n3 0 70|C1 n1 0 1n",
    "inductor_cutset_active":
        "L1 n1 n2 1u|L2 n2 n3 2u|L3 n2 0 1u|R1 n1 0 500|R2 n3 0 700|C1 n1 0 1n|C2 n3 0 1n|G1 n1 0 n3 0 -0.01",
    "capacitor_loop": "C1 n1 0 1n|C2 n1 n2 2n|C3 n2 0 1n|R1 n1 n2 100|L1 n1 0 1u",
    "capacitor_loop_active": "C1 n1 0 1n|C2 n1 n2 2n|C3 n2 0 1n|R1 n1 n2 100|R2 n2 0 1k|L1 n1 0 1u|G1 n1 0 n2 0 0.05",
    "capacitor_cutset": "C1 n1 n2 1n|C2 n2 n3 1n|C3 n2 0 1n|R1 n1 0 100|R2 n3 0 10|L1 n1 n3 1u",
    "capacitor_cutset_active": "C1 n1 n2 1n|C2 n2 n3 1n|C3 n2 0 1n|R1 n1 0 100|R2 n3 0 1k|G1 n3 0 n1 0 0.1|G2 n1 0 n3 0 0.1",
    "loop_through_amplifier": "E1 n1 0 n2 0 0.9|C1 n1 n2 1n|C2 n2 0 1n|R1 n2 0 1k|L1 n2 0 1u",
    "loop_through_unity_amplifier": "E1 n1 0 n2 0 1|C1 n1 n2 1n|C2 n2 0 1n|R1 n2 0 1k|L1 n2 0 1u",
    "loop_beyond_unity": "E1 n1 0 n2 0 3|C1 n1 n2 1n|C2 n2 0 1n|R1 n2 0 1k|L1 n2 0 1u|R2 n1 n3 50|C3 n3 0 10p",
    # Lossless parts: modes exactly on the axis.
    "isolated_tank": "L1 n1 0 1u|C1 n1 0 1n|R1 n2 0 50|C2 n2 0 1n|G1 n2 0 n2 0 -0.05",
    "isolated_tank_stable": "L1 n1 0 1u|C1 n1 0 1n|R1 n2 0 50|C2 n2 0 1n|G1 n2 0 n3 0 0.05|R3 n3 0 10|C3 n3 0 1p",
    "two_equal_isolated_tanks": "L1 n1 0 1u|C1 n1 0 1n|L2 n2 0 1u|C2 n2 0 1n|R1 n3 0 50|C3 n3 0 1n",
    "isolated_floating_tank": "L1 n1 n2 1u|C1 n1 n2 1n|R1 n3 0 50|C2 n3 0 1n|R2 n1 0 1meg|G1 n3 0 n3 0 -0.05",
    "lossless_pair_with_gain": "L1 n1 0 1u|C1 n1 0 1n|L2 n2 0 2u|C2 n2 0 1n|C3 n1 n2 10p|G1 n1 0 n2 0 0.001",
    "lossless_ladder_one_source":
        "C1 n1 0 1n|L1 n1 n2 1u|C2 n2 0 1n|L2 n2 n3 1u|C3 n3 0 1n|L3 n3 0 2u|G1 n3 0 n1 0 0.0005",
    "gyrated_tank": "C1 n1 0 1n|C2 n2 0 1n|G1 n1 0 n2 0 0.01|G2 n2 0 n1 0 -0.01",
    "quadruplet": "C1 n1 0 1n|L1 n1 n2 1u|C2 n2 0 1n|G1 n1 0 n2 0 0.02|R1 n1 n2 10k|G2 n2 0 n1 0 -0.001",
    "axis_modes_that_split": "L1 n1 0 1u|C1 n1 0 1n|L2 n2 0 1u|C2 n2 0 1n|G1 n1 0 n2 0 0.001|G2 n2 0 n1 0 -0.001",
    "symmetric_gain_and_loss": "L1 n1 0 1u|C1 n1 0 1n|G1 n1 0 n1 0 -0.001|L2 n2 0 1u|C2 n2 0 1n|R2 n2 0 1k|C3 n1 n2 500p",
    # Modes at the origin.
    "integrator": "C1 n1 0 1n|G1 n1 0 n2 0 0.001|R1 n2 0 100|C2 n2 0 1p",
    "two_integrators": "C1 n1 0 1n|G1 n2 0 n1 0 0.001|C2 n2 0 1n|R1 n3 0 10|C3 n3 0 1n|G2 n3 0 n2 0 0.001",
    "two_integrators_coupled": "C1 n1 0 1n|C2 n2 0 1n|G1 n1 0 n2 0 1m|R1 n2 n3 50|C3 n3 n4 1n|C4 n4 0 1n|R4 n3 0 75",
    "floating_capacitors_active": "C1 n1 n2 1n|R1 n1 0 50|R2 n2 n3 50|C2 n3 n4 1n|R4 n4 0 50|G1 n4 0 n1 0 0.1|G2 n1 0 n4 0 0.1",
    "shorted_coil_ring": "L1 n1 n2 1n|L2 n2 n1 2n|R1 n1 0 50|R2 n2 0 50|C1 n2 0 1p|G1 n2 0 n1 0 -0.1",
    # Coupled coils.
    "rigid_transformer": "L1 n1 0 1u|L2 n2 0 4u|K1 L1 L2 1|R1 n1 0 50|C1 n1 0 100p|R2 n2 0 1k|C2 n2 0 30p",
    "rigid_transformer_active":
        "L1 n1 0 1u|L2 n2 0 4u|K1 L1 L2 1|R1 n1 0 1k|C1 n1 0 100p|R2 n2 0 1k|C2 n2 0 30p|G1 n1 0 n2 0 -0.01",
    "rigid_transformer_irrational":
        "L1 n1 0 1u|L2 n2 0 3u|K1 L1 L2 1|R1 n1 0 1k|C1 n1 0 100p|R2 n2 0 1k|C2 n2 0 30p|G1 n1 0 n2 0 -0.01",
    "rigid_coils_shorted": "L1 n1 0 1u|L2 n2 0 1u|K1 L1 L2 1|R1 n1 0 50|V1 n2 0 0|C1 n1 0 1n|F1 n1 0 V1 3",
    "three_rigid_coils":
        "L1 n1 0 1u|L2 n2 0 4u|L3 n3 0 9u|K1 L1 L2 1|K2 L1 L3 1|K3 L2 L3 1|R1 n1 0 50|R2 n2 0 90|C3 n3 0 10p|R3 n3 n4 5|C4 n4 0 1n",
    "rigid_transformer_reversed":
        "L1 n1 0 1u|L2 n2 0 4u|K1 L1 L2 -1|R1 n1 0 1k|C1 n1 0 100p|R2 n2 0 1k|C2 n2 0 30p|G1 n1 0 n2 0 0.01",
    "all_but_rigid_transformer":
        "L1 n1 0 1u|L2 n2 0 1u|K1 L1 L2 0.999999999|R1 n1 0 1k|C1 n1 0 100p|R2 n2 0 1k|C2 n2 0 30p|G1 n1 0 n2 0 -0.01",
    "coupling_just_beyond_passive": "L1 n1 0 1u|L2 n2 0 1u|K1 L1 L2 1.000000001|R1 n1 0 1k|C1 n1 0 100p|R2 n2 0 1k|C2 n2 0 30p",
    "coupling_beyond_passive": "L1 n1 0 1u|L2 n2 0 1u|K1 L1 L2 1.2|R1 n1 0 50|R2 n2 0 50|C1 n1 0 1n",
    "three_coils_not_passive":
        "L1 n1 0 1u|L2 n2 0 1u|L3 n3 0 1u|K1 L1 L2 0.9|K2 L1 L3 0.9|K3 L2 L3 -0.9|R1 n1 0 50|R2 n2 0 50|R3 n3 0 50",
    # Negative parts, and oscillation without any controlled source.
    "negative_resistor": "R1 n1 0 -50|C1 n1 0 1n|R2 n1 n2 20|L1 n2 0 1u",
    "negative_capacitor": "R1 n1 0 50|C1 n1 0 -1n|R2 n1 n2 20|C2 n2 0 3n",
    "negative_inductor": "R1 n1 0 50|L1 n1 0 -1u|R2 n1 n2 20|C2 n2 0 3n",
    "negative_resistor_cured": "R1 n1 0 -50|C1 n1 0 1n|G1 n1 0 n2 0 0.1|R2 n1 n2 10|C2 n2 0 1p",
    # High gain.
    "high_gain": "R1 n1 0 1k|C1 n1 0 1p|G1 n2 0 n1 0 1meg|R2 n2 0 1meg|C2 n2 0 1n|R3 n1 n2 10k",
    "nullor_like_inverter": "R1 n0 n1 1k|R0 n0 0 50|R2 n1 n2 10k|C2 n1 n2 1p|C1 n1 0 1p|E1 n2 0 0 n1 1e9",
    "nullor_like_wrong_sign": "R1 n0 n1 1k|R0 n0 0 50|R2 n1 n2 10k|C2 n1 n2 1p|C1 n1 0 1p|E1 n2 0 n1 0 1e9",
    "nullor_like_lagging_wrong_sign":
        "R1 n0 n1 1k|R0 n0 0 50|R2 n1 n2 10k|C1 n1 0 1p|E1 n3 0 n1 0 1e9|R3 n3 n4 1k|C4 n4 0 1n|E2 n2 0 n4 0 1",
    "nullor_like_two_poles":
        "R0 n1 0 1k|C0 n1 0 1p|E1 n2 0 0 n1 1e8|R2 n2 n3 1k|C3 n3 0 1n|E2 n4 0 n3 0 1|R4 n4 n5 1k|C5 n5 0 1n|R5 n5 n1 1k",
    "nullor_like_current": "R1 n1 n2 1k|V1 n2 0 0|C1 n1 0 1p|F1 n1 0 V1 1e7|R3 n1 n3 100|C3 n3 0 1n",
    # Far from the middle of the band.
    "all_but_infinite": "E1 n1 0 n2 0 2.0000001|C1 n1 n2 10f|C2 n2 0 10f|R1 n2 0 1",
    "nineteen_decades": "R1 n1 0 1|C1 n1 0 1f|R2 n2 0 1meg|C2 n2 0 1m|G1 n1 0 n2 0 1|G2 n2 0 n1 0 1|G3 n1 0 n1 0 -0.5",
    "slow_growth": "C1 n1 0 1m|C2 n2 0 1m|G1 n1 0 n2 0 1m|G2 n2 0 n1 0 -1m|R2 n2 0 -1meg",
    # Degenerate multiplicities and plain poles.
    "equal_damped_tanks": "L1 n1 0 1u|C1 n1 0 1n|R1 n1 0 1k|L2 n2 0 1u|C2 n2 0 1n|R2 n2 0 1k",
    "equal_growing_tanks": "L1 n1 0 1u|C1 n1 0 1n|R1 n1 0 -1k|L2 n2 0 1u|C2 n2 0 1n|R2 n2 0 -1k",
    "chain_of_equal_growing_poles":
        "C1 n1 0 1n|R1 n1 0 -100|G2 n2 0 n1 0 1m|C2 n2 0 1n|R2 n2 0 -100|G3 n3 0 n2 0 1m|C3 n3 0 1n|R3 n3 0 -100",
    "two_equal_stages":
        "L1 n1 0 1u|C1 n1 0 1n|R1 n1 0 3162277|L2 n2 0 1u|C2 n2 0 1n|R2 n2 0 3162277|G1 n2 0 n1 0 1m",
    "three_equal_stages":
        "L1 n1 0 1u|C1 n1 0 1n|R1 n1 0 3162277|L2 n2 0 1u|C2 n2 0 1n|R2 n2 0 3162277|L3 n3 0 1u|C3 n3 0 1n|R3 n3 0 3162277"
        "|G1 n2 0 n1 0 1m|G2 n3 0 n2 0 1m",
    "real_growing_pole": "C1 n1 0 1n|R1 n1 0 100|G1 n1 0 n1 0 -0.02",
    "no_reactance": "R1 n1 0 50|R2 n1 n2 50|R3 n2 0 50|G1 n2 0 n1 0 -0.1",
    # Networks without a determinant: currents or voltages that nothing fixes.
    "singular_floating_gate": "G1 n1 0 n2 0 0.01|R1 n1 0 50|C1 n1 0 1n",
    "singular_cancelling": "R1 n1 0 64|G1 n1 0 n1 0 -0.015625|R2 n2 0 50|C2 n2 0 1n",
    "singular_floating_island": "R1 n1 n2 50|C1 n1 n2 1n|R2 n3 0 50|C2 n3 0 1n",
    "singular_source_loop": "E1 n1 0 n2 0 2|E2 n1 0 n2 0 3|R1 n1 0 50|R2 n2 0 50|E3 n2 0 n1 0 0.5|C1 n2 0 1n",
}


def equal_stages(number, quality):
    """A one-way cascade of tuned stages that are all alike: each mode has as many equal copies, in one Jordan block."""
    cards = []
    for k in range(1, number + 1):
        cards += [f"L{k} n{k} 0 1u", f"C{k} n{k} 0 1n", f"R{k} n{k} 0 {31.6227766 * quality:.9g}"]
        cards += [f"G{k} n{k} 0 n{k - 1} 0 10m"] if k > 1 else []
    return "|".join(cards)


# Harder than double precision, or than the stated range of modes, allows without special care. Asked for by an option.
HARD_CIRCUITS = {
    "lossless_stages_2": "L1 n1 0 1u|C1 n1 0 1n|L2 n2 0 1u|C2 n2 0 1n|G1 n2 0 n1 0 1m",
    "lossless_stages_3": "L1 n1 0 1u|C1 n1 0 1n|L2 n2 0 1u|C2 n2 0 1n|L3 n3 0 1u|C3 n3 0 1n|G1 n2 0 n1 0 1m|G2 n3 0 n2 0 1m",
    "equal_stages_5_q1e5": equal_stages(5, 1e5),
    "equal_stages_6_q1e4": equal_stages(6, 1e4),
    "equal_stages_8_q1e3": equal_stages(8, 1e3),
    "equal_stages_10_q100": equal_stages(10, 100),
    "growth_over_months": "R1 n1 0 1meg|C1 n1 0 1m|G1 n1 0 n1 0 -1.0001u",
    "growth_over_years": "R1 n1 0 1e9|C1 n1 0 1|G1 n1 0 n1 0 -2n",
    "controlled_by_coil": "L1 n1 n2 1u|C1 n1 0 1n|R1 n2 0 50|F1 n1 0 L1 -1.2|R2 n1 0 1k",
}


def edge_texts(hard=False):
    """name -> netlist text."""
    chosen = EDGE_CIRCUITS | (HARD_CIRCUITS if hard else {})
    return {name: "\n".join([f"* {name}", f"*~ block {name}", *cards.split("|"), ".end"]) + "\n"
            for name, cards in chosen.items()}
