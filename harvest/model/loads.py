"""The loads that a stack can feed: one table of names and meanings."""

MATCHED = "matched"
MAXIMUM_POWER = "maximum power"
FIXED_RESISTANCE = "fixed resistance"
FIXED_VOLTAGE = "fixed voltage"
OPEN_CIRCUIT = "open circuit"

LOADS = {
    MAXIMUM_POWER: "the load that gives most power, temperatures reacting",
    MATCHED: "load resistance equal to the internal resistance at the operating point",
    FIXED_RESISTANCE: "the given load_resistance",
    FIXED_VOLTAGE: "the given load_voltage",
    OPEN_CIRCUIT: "no current",
}
