"""Names as a reader of the report meets them."""

DISPLAY = {
    "ballistic": "ballistic",
    "exponential": "exponential",
    "richardson": "Richardson",
    "diffusive": "diffusive",
    "free": "free",
}
CURVES = {"exit_rate": "exit rates", "separation": "separations at fixed times", "joint": "both together"}
DECISIONS = {
    "supported": "Supported",
    "undecided": "Undecided",
    "none_fits": "None fits",
}
ARROW = " \u2192 "


def sequence(pieces: tuple[str, ...]) -> str:
    """A sequence of regimes from small to large separations, joined by arrows."""
    return ARROW.join(DISPLAY[piece] for piece in pieces)
