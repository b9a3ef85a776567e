"""Triangles and lines into a picture that keeps a depth for each pixel, compiled: arrays in, arrays changed.

Pixels are 0xffRRGGBB. `nearness` (height, width) holds the greatest 1 / depth, 1/mm, drawn at a pixel so far. Points
are in the eye's system: x right and y down, both scaled so that x / z is pixels from the picture's middle, and z the
depth, mm.
A corner is a row of six: x, y, z or nearness, red, green, blue (0 to 255).
"""

import math

import numpy as np
from numpy.typing import NDArray

from geometry.kernel import compiled, inlined

Singles = NDArray[np.float32]
Indices = NDArray[np.int32]
Pixels = NDArray[np.uint32]

# Lines lie on surfaces: they count as nearer by this share of the depth.
_LINES_NEARER = 1.0015
_NO_AREA = 1e-9


@inlined
def blended(below: int, red: float, green: float, blue: float, opacity: float) -> int:
    """Return the pixel that a colour, channels 0 to 255, laid over a pixel makes."""
    if opacity < 1.0:
        red = opacity * red + (1.0 - opacity) * ((below >> 16) & 255)
        green = opacity * green + (1.0 - opacity) * ((below >> 8) & 255)
        blue = opacity * blue + (1.0 - opacity) * (below & 255)
    bits = (int(min(red, 255.0)) << 16) | (int(min(green, 255.0)) << 8) | int(min(blue, 255.0))
    return 0xFF000000 | bits


@inlined
def crossing(low_x: float, low_y: float, high_x: float, high_y: float, y: float, span: Singles) -> None:
    """Widen `span` (2,) to where an edge crosses the row's middle, if it does."""
    if (low_y <= y) != (high_y <= y):
        x = low_x + (y - low_y) * (high_x - low_x) / (high_y - low_y)
        span[0] = min(span[0], x)
        span[1] = max(span[1], x)


@inlined
def fill_row(
    corner: Singles, dx: Singles, dy: Singles, y: int, span: Singles, opacity: float, pixels: Pixels, nearness: Singles
) -> None:
    """Draw a row of a triangle: `dx` and `dy` (6,) are how nearness and colour change along x and y from `corner`."""
    first = max((math.ceil(span[0] - 0.5)), 0)
    beyond = min((math.ceil(span[1] - 0.5)), pixels.shape[1])
    along, down = first + 0.5 - corner[0], y + 0.5 - corner[1]
    near = corner[2] + along * dx[2] + down * dy[2]
    red = corner[3] + along * dx[3] + down * dy[3]
    green = corner[4] + along * dx[4] + down * dy[4]
    blue = corner[5] + along * dx[5] + down * dy[5]
    for x in range(first, beyond):
        if near > nearness[y, x]:
            pixels[y, x] = blended(int(pixels[y, x]), red, green, blue, opacity)
            if opacity >= 1.0:
                nearness[y, x] = near
        near += dx[2]
        red += dx[3]
        green += dx[4]
        blue += dx[5]


@compiled
def fill_triangle(
    corners: Singles, a: int, b: int, c: int, opacity: float, pixels: Pixels, nearness: Singles, spare: Singles
) -> None:
    """Draw the triangle of three rows of `corners`, if it turns clockwise in the picture, whose y points down."""
    bx, by = corners[b, 0] - corners[a, 0], corners[b, 1] - corners[a, 1]
    cx, cy = corners[c, 0] - corners[a, 0], corners[c, 1] - corners[a, 1]
    area = bx * cy - by * cx
    if area > -_NO_AREA:
        return
    dx, dy, span = spare[0], spare[1], spare[2]
    for value in range(2, 6):
        to_b, to_c = corners[b, value] - corners[a, value], corners[c, value] - corners[a, value]
        dx[value] = (to_b * cy - to_c * by) / area
        dy[value] = (to_c * bx - to_b * cx) / area
    top = min(corners[a, 1], corners[b, 1], corners[c, 1])
    bottom = max(corners[a, 1], corners[b, 1], corners[c, 1])
    for y in range(max((math.ceil(top - 0.5)), 0), min((math.ceil(bottom - 0.5)), pixels.shape[0])):
        span[0], span[1] = np.inf, -np.inf
        middle = y + 0.5
        crossing(corners[a, 0], corners[a, 1], corners[b, 0], corners[b, 1], middle, span)
        crossing(corners[b, 0], corners[b, 1], corners[c, 0], corners[c, 1], middle, span)
        crossing(corners[c, 0], corners[c, 1], corners[a, 0], corners[a, 1], middle, span)
        fill_row(corners[a], dx, dy, y, span, opacity, pixels, nearness)


@inlined
def clipped(corners: Singles, near_mm: float) -> int:
    """Put what of the triangle in rows 0 to 2 lies beyond the near plane into rows 3 to 6; return how many corners."""
    count = 0
    for here in range(3):
        after = (here + 1) % 3
        one, other = corners[here, 2] - near_mm, corners[after, 2] - near_mm
        if one >= 0.0:
            for value in range(6):
                corners[3 + count, value] = corners[here, value]
            count += 1
        if (one >= 0.0) != (other >= 0.0):
            share = one / (one - other)
            for value in range(6):
                corners[3 + count, value] = corners[here, value] + share * (
                    corners[after, value] - corners[here, value]
                )
            count += 1
    return count


@compiled
def draw_triangles(
    points: Singles,
    colours: Singles,
    triangles: Indices,
    opacity: float,
    near_mm: float,
    pixels: Pixels,
    nearness: Singles,
    spare: Singles,
) -> None:
    """Draw a mesh: `points` (n, 3) of the eye's system, `colours` (n, 3), `triangles` (m, 3).

    `spare` (16, 6) is overwritten.
    """
    corners, rest = spare[:8], spare[8:]
    middle_x, middle_y = pixels.shape[1] / 2.0, pixels.shape[0] / 2.0
    for triangle in range(len(triangles)):
        for corner in range(3):
            vertex = triangles[triangle, corner]
            for axis in range(3):
                corners[corner, axis] = points[vertex, axis]
                corners[corner, 3 + axis] = colours[vertex, axis]
        count = clipped(corners, near_mm)
        for corner in range(3, 3 + count):
            near = 1.0 / corners[corner, 2]
            corners[corner, 0] = middle_x + corners[corner, 0] * near
            corners[corner, 1] = middle_y + corners[corner, 1] * near
            corners[corner, 2] = near
        for last in range(2, count):
            fill_triangle(corners, 3, 2 + last, 3 + last, opacity, pixels, nearness, rest)


@inlined
def draw_dots(
    start: Singles, end: Singles, colour: Singles, opacity: float, width: int, pixels: Pixels, nearness: Singles
) -> None:
    """Draw a line between two corners, of which x, y and nearness count, a dot for each step along its longer side."""
    steep = abs(end[1] - start[1]) > abs(end[0] - start[0])
    long, short = (1, 0) if steep else (0, 1)
    length = end[long] - start[long]
    if abs(length) < 1e-3:
        return
    height, wide = pixels.shape
    first = max((math.ceil(min(start[long], end[long]) - 0.5)), 0)
    beyond = min((math.ceil(max(start[long], end[long]) - 0.5)), height if steep else wide)
    for place in range(first, beyond):
        share = (place + 0.5 - start[long]) / length
        near = (start[2] + share * (end[2] - start[2])) * _LINES_NEARER
        across = math.floor(start[short] + share * (end[short] - start[short]) - 0.5 * (width - 1))
        for side in range(across, across + width):
            y, x = (place, side) if steep else (side, place)
            if 0 <= y < height and 0 <= x < wide and near > nearness[y, x]:
                pixels[y, x] = blended(int(pixels[y, x]), colour[0], colour[1], colour[2], opacity)


@compiled
def draw_lines(
    lines: Singles,
    colour: Singles,
    opacity: float,
    width: int,
    near_mm: float,
    pixels: Pixels,
    nearness: Singles,
    spare: Singles,
) -> None:
    """Draw `lines` (k, 2, 3) of the eye's system in one colour (3,), `width` pixels wide.

    `spare` (16, 6) is overwritten.
    """
    ends = spare[:2]
    middle = (pixels.shape[1] / 2.0, pixels.shape[0] / 2.0)
    for line in range(len(lines)):
        beyond = (lines[line, 0, 2] - near_mm, lines[line, 1, 2] - near_mm)
        if beyond[0] < 0.0 and beyond[1] < 0.0:
            continue
        for end in range(2):
            share = 0.0 if beyond[end] >= 0.0 else beyond[end] / (beyond[end] - beyond[1 - end])
            for axis in range(3):
                here = lines[line, end, axis]
                ends[end, axis] = here + share * (lines[line, 1 - end, axis] - here)
            near = 1.0 / ends[end, 2]
            ends[end, 0] = middle[0] + ends[end, 0] * near
            ends[end, 1] = middle[1] + ends[end, 1] * near
            ends[end, 2] = near
        draw_dots(ends[0], ends[1], colour, opacity, width, pixels, nearness)


@compiled
def halved(large: Pixels, small: Pixels) -> None:
    """Fill `small` (height, width) with the means of 2 by 2 pixels of `large`."""
    for y in range(small.shape[0]):
        for x in range(small.shape[1]):
            bits = 0
            for shift in (0, 8, 16):
                total = 2
                for row in range(2):
                    for column in range(2):
                        total += (int(large[2 * y + row, 2 * x + column]) >> shift) & 255
                bits |= (total >> 2) << shift
            small[y, x] = 0xFF000000 | bits
