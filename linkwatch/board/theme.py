"""The board's own colours: ink and paper, one amber for care, one red for trouble."""

from textual.theme import Theme

NIGHT = Theme(
    name="linkwatch-night",
    primary="#6fa8c9",
    secondary="#8fa3b0",
    accent="#7cc4e8",
    foreground="#d9e2e7",
    background="#0d1317",
    surface="#0d1317",
    panel="#1b262d",
    success="#74c69d",
    warning="#e9b44c",
    error="#f0736a",
    dark=True,
)
