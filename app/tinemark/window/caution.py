"""The caution of the design, in full, as About shows it."""

CAUTION = (
    "Results hold for the model as written, not for a device, a machine or a patient. Driving hardware or "
    "tissue past an onset can overheat, overstress or injure. Hardware limits, interlocks, local codes and a "
    "qualified, licensed practitioner decide; Tinemark's numbers are one input to that decision."
)
