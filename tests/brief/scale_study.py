"""A scale on a bench: the study into which tests put a forcing and a limit, one of which is at fault."""

from __future__ import annotations

from small_studies import mass_on_mounts, parts_from, study_text, table

TONE = """kind = "harmonic-force"
name = "hum"
frequency = "25 Hz"
position = ["0 m", "0 m", "0.1 m"]
force = ["0 N", "0 N", "5 N"]
"""
LIMIT = """kind = "acceleration"
at = "pan"
direction = "z"
measure = "peak"
limit = "1 m/s^2"
"""


def scale(forcing: str = TONE, allowable: str = LIMIT) -> str:
    """The study with the keys of its forcing and of its allowable."""
    return study_text(
        "Scale on a bench",
        mass_on_mounts("30 kg", stations={"S": 0.0}, body="scale", point="pan", centre=0.1, top=0.2),
        table("condition", name="working", shafts={}),
        f"[[forcing]]\n{forcing}\n[[allowable]]\n{allowable}\n",
        parts_from("rubber"),
    )
