"""The cautions that stand in the README, the report and the terminal summary."""

from detune.brief.brief import Brief

RIGID = (
    "Bodies are rigid here. Frame and casing modes, loose connections and a floor that is not as stated change "
    "the response; measure the natural frequencies and the vibration after installation."
)
LISTED = "Parts are taken at their listed values; the scatter of real parts is not in this result."
CAUTIONS: tuple[str, ...] = (
    "A result is a calculation from the numbers stated; it is no approval and no measurement. Check the mass, "
    "the centre, the forcing and the parts list before relying on it.",
    "Machines can hurt people: local codes, the maker's instructions and the judgement of a licensed "
    "engineer come first, and guards, anchorage, seismic restraint and lifting are not part of this calculation.",
    RIGID,
    LISTED,
)
STRUCTURE = (
    "The structure moves in the modes stated and in no others, other bodies are rigid. Loose connections and "
    "a floor that is not as stated change the response; measure the natural frequencies and the vibration "
    "after installation."
)
INTERVAL = (
    "What is proven over the scatter holds for the intervals stated and for the machine as modelled, for "
    "nothing beyond: wear, temperature, creep and parts outside their tolerance are not in it unless the "
    "brief states them."
)
YIELD = (
    "A yield is an estimate from samples of the distribution stated; single machines may miss a limit, and the margins "
    "beside it are at listed values."
)


def cautions(brief: Brief) -> tuple[str, ...]:
    """Return the cautions of a study: rigid bodies only where there is no structure, listed values only
    without scatter.
    """
    last = LISTED if brief.scatter is None else INTERVAL if brief.scatter.judge == "interval" else YIELD
    return (*CAUTIONS[:2], RIGID if brief.structure is None else STRUCTURE, last)
