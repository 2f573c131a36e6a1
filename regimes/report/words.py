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


def checked(curve: str) -> str:
    """The name of a curve that was held against its prediction."""
    return curve.replace("_", " ")


def p_text(value: float) -> str:
    """A p-value to two decimals, below 0.1 to two digits, never 0."""
    if value >= 0.1:
        return f"{value:.2f}"
    return f"{value:.2g}" if value >= 1e-4 else "under 0.0001"
