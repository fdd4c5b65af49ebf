"""What the kit says wherever someone could get hurt, in one place."""

from __future__ import annotations

CAUTIONS = (
    (
        "Heat and fire",
        "Coils burn fingers and, left on, burn benches. A bench that runs unattended "
        "has an independent thermal cut-out in the coil's supply.",
    ),
    (
        "Magnets",
        "They pinch, shatter, wipe cards and can stop pacemakers and other implants. Keep "
        "people who wear one away.",
    ),
    (
        "Magnetic liquids",
        "They stain for good and irritate skin and eyes. Gloves, goggles, a tray; "
        "read the safety data sheet.",
    ),
    ("Pressure", "It lets go suddenly. Wear eye protection; relieve it before a line is opened."),
    (
        "No rated safety",
        "Firmware interlocks are no rated safety function, and nothing here is a "
        "medical device. Local electrical codes and licensed practice come first.",
    ),
)


def text() -> str:
    """The cautions as plain lines."""
    return "\n".join(f"- {head}: {body}" for head, body in CAUTIONS)
