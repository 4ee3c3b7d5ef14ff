"""What has to stand beside every design: pressure and sterility can hurt people."""

CAUTIONS = (
    "Pressure: the weakest component of the train (hose, clamp, housing, gauge, module) sets the limit, "
    "not the pump. Fit relief or a high-pressure cut-out below that rating.",
    "Confirm the design with a run at scale on a representative lot before a batch depends on it.",
    "Sterility and bioburden: area says nothing of retention or integrity; a sterilizing or "
    "bioburden-reducing filter needs its own validation and integrity test.",
    "A qualified engineer reviews and owns the design. Local codes and licensed practice take precedence.",
)
"""Common practice, no source."""
