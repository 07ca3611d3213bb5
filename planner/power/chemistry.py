"""Built-in cell tables: open-circuit voltage, resistance and cycle life, each with its source."""

# Full-cell open-circuit voltage, PyBaMM 26.10 parameter set Prada2013 (computed once, kept as numbers): [soc_pct, V]
LIFEPO4_OPEN_CIRCUIT = (
    (0.0, 2.000), (5.0, 2.785), (10.0, 2.978), (20.0, 3.169), (30.0, 3.206), (40.0, 3.253), (50.0, 3.266),
    (60.0, 3.269), (70.0, 3.274), (80.0, 3.310), (90.0, 3.314), (95.0, 3.3164), (96.0, 3.3193), (97.0, 3.3274),
    (98.0, 3.3502), (98.5, 3.3743), (99.0, 3.4150), (99.5, 3.4838), (100.0, 3.6000),
)  # fmt: skip

# Generic layered-oxide lithium-ion cell, from memory: right to some tens of millivolt, bring your own table
LI_ION_OPEN_CIRCUIT = (
    (0.0, 3.00), (5.0, 3.35), (10.0, 3.45), (20.0, 3.55), (30.0, 3.61), (40.0, 3.66), (50.0, 3.73),
    (60.0, 3.82), (70.0, 3.92), (80.0, 4.02), (90.0, 4.09), (100.0, 4.20),
)  # fmt: skip

OPEN_CIRCUIT = {"LiFePO4": LIFEPO4_OPEN_CIRCUIT, "Li-ion": LI_ION_OPEN_CIRCUIT}

# Direct-current resistance against its value at 25 degC and half charge; both chemistries alike, from memory
RESISTANCE_BY_TEMPERATURE = ((-20.0, 5.0), (-10.0, 3.2), (0.0, 2.1), (10.0, 1.5), (25.0, 1.0), (40.0, 0.8))
RESISTANCE_BY_CHARGE = ((0.0, 2.0), (10.0, 1.4), (20.0, 1.1), (30.0, 1.0), (90.0, 1.0), (100.0, 1.1))

# Cycles to the end of life by depth [depth_pct, cycles], from memory and of the right order only
CYCLE_LIFE = {
    "LiFePO4": ((10.0, 60_000.0), (20.0, 25_000.0), (50.0, 7_000.0), (80.0, 3_500.0), (100.0, 2_500.0)),
    "Li-ion": ((10.0, 30_000.0), (20.0, 12_000.0), (50.0, 3_000.0), (80.0, 1_200.0), (100.0, 700.0)),
}
