"""The cautions that stand in the README, the report and the terminal summary."""

CAUTIONS: tuple[str, ...] = (
    "A result is a calculation from the numbers stated; it is no approval and no measurement. Check the mass, "
    "the centre, the forcing and the parts list before relying on it.",
    "Machines can hurt people: local codes, the maker's instructions and the judgement of a licensed "
    "engineer come first, and guards, anchorage, seismic restraint and lifting are not part of this calculation.",
    "Bodies are rigid here. Frame and casing modes, loose connections and a floor that is not as stated change "
    "the response; measure the natural frequencies and the vibration after installation.",
    "Parts are taken at their listed values; scatter of real parts is not yet in this result unless the margins say so.",
)
