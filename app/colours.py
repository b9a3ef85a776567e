"""Arithmetic with colours written as "#rrggbb"."""


def relative_luminance(colour: str) -> float:
    """Return the relative luminance, 0 to 1, of "#rrggbb" (WCAG 2.1, "relative luminance")."""
    red, green, blue = (linear_light(channel) for channel in rgb(colour))
    return 0.2126 * red + 0.7152 * green + 0.0722 * blue


def linear_light(channel: float) -> float:
    """Return the linear light, 0 to 1, of an sRGB channel, 0 to 1 (IEC 61966-2-1)."""
    return channel / 12.92 if channel <= 0.04045 else ((channel + 0.055) / 1.055) ** 2.4


def rgb(colour: str) -> tuple[float, float, float]:
    """Return red, green and blue, 0 to 1, of "#rrggbb"."""
    red, green, blue = (int(colour[i : i + 2], 16) / 255.0 for i in (1, 3, 5))
    return red, green, blue
