"""The cautions, worded once; every report and file quotes them from here."""

CAUTIONS = (
    "A planning aid, not permission to transmit: an authorised person approves each contact under the station's "
    "licence and frequency coordination.",
    "Near a transmitting antenna there is radio-frequency exposure, and antennas move without warning: site "
    "interlocks, local rules and the people on site decide.",
    "Predictions from element sets age; check them against fresh sets before use. Weather counts only where the "
    "policy states an unavailability, as long-term statistics, not as a forecast.",
)
