"""Draws the kernel's logo: a data cloud's ellipse with its two semi-axes.

Run by hand in this folder; it writes logo-svg.svg, logo-32x32.png and logo-64x64.png, always the
same bytes. It needs nothing but Python 3.
"""

import math
import struct
import zlib

SIZE = 64.0
CENTRE = (32.0, 32.0)
LONG, SHORT = 27.0, 14.5
TILT = math.radians(-33.0)  # up to the right; the y axis of a picture points down
OUTLINE, AXIS, DOT = 2.2, 3.2, 4.2
FILL = (0xF3, 0xE3, 0xD8)
INK = (0x3B, 0x32, 0x2C)
FIRST = (0xB4, 0x4A, 0x26)  # the larger semi-axis, in the colour of fired clay
SECOND = (0x3F, 0x6E, 0x7A)

COS, SIN = math.cos(TILT), math.sin(TILT)


def tip(along, across):
    return (CENTRE[0] + along * COS - across * SIN, CENTRE[1] + along * SIN + across * COS)


LONG_TIP, SHORT_TIP = tip(LONG, 0.0), tip(0.0, -SHORT)


def hex_of(colour):
    return "#%02x%02x%02x" % colour


def svg():
    def axis(end, colour):
        return (
            f'<line x1="{CENTRE[0]:.2f}" y1="{CENTRE[1]:.2f}" x2="{end[0]:.2f}" y2="{end[1]:.2f}" '
            f'stroke="{hex_of(colour)}" stroke-width="{AXIS}" stroke-linecap="round"/>'
        )

    return "\n".join([
        '<svg xmlns="http://www.w3.org/2000/svg" viewBox="0 0 64 64" width="64" height="64">',
        "<title>An ellipse and its two semi-axes</title>",
        f'<ellipse cx="{CENTRE[0]:.2f}" cy="{CENTRE[1]:.2f}" rx="{LONG}" ry="{SHORT}" '
        f'transform="rotate({math.degrees(TILT):.0f} {CENTRE[0]:.0f} {CENTRE[1]:.0f})" '
        f'fill="{hex_of(FILL)}" stroke="{hex_of(INK)}" stroke-width="{OUTLINE}"/>',
        axis(SHORT_TIP, SECOND),
        axis(LONG_TIP, FIRST),
        f'<circle cx="{CENTRE[0]:.2f}" cy="{CENTRE[1]:.2f}" r="{DOT}" fill="{hex_of(INK)}"/>',
        "</svg>",
        "",
    ])


def distance_to_segment(x, y, end):
    dx, dy = end[0] - CENTRE[0], end[1] - CENTRE[1]
    t = ((x - CENTRE[0]) * dx + (y - CENTRE[1]) * dy) / (dx * dx + dy * dy)
    t = min(1.0, max(0.0, t))
    return math.hypot(x - CENTRE[0] - t * dx, y - CENTRE[1] - t * dy)


def colour_at(x, y):
    """The colour at a point of the 64 by 64 plane, or None outside the drawing."""
    if math.hypot(x - CENTRE[0], y - CENTRE[1]) <= DOT:
        return INK
    if distance_to_segment(x, y, LONG_TIP) <= AXIS / 2:
        return FIRST
    if distance_to_segment(x, y, SHORT_TIP) <= AXIS / 2:
        return SECOND
    u = (x - CENTRE[0]) * COS + (y - CENTRE[1]) * SIN
    v = -(x - CENTRE[0]) * SIN + (y - CENTRE[1]) * COS
    # The distance to the outline, to first order: the implicit function over its gradient.
    f = (u / LONG) ** 2 + (v / SHORT) ** 2 - 1.0
    gradient = 2.0 * math.hypot(u / LONG**2, v / SHORT**2)
    if gradient > 0.0 and abs(f) / gradient <= OUTLINE / 2:
        return INK
    return FILL if f < 0.0 else None


def png(pixels, samples=8):
    step = SIZE / pixels
    rows = bytearray()
    for row in range(pixels):
        rows.append(0)
        for column in range(pixels):
            total, covered = [0, 0, 0], 0
            for i in range(samples):
                for j in range(samples):
                    colour = colour_at(
                        (column + (j + 0.5) / samples) * step, (row + (i + 0.5) / samples) * step
                    )
                    if colour is not None:
                        covered += 1
                        total = [a + b for a, b in zip(total, colour)]
            mean = [round(part / covered) for part in total] if covered else [0, 0, 0]
            rows += bytes(mean + [round(255 * covered / samples**2)])

    def chunk(kind, data):
        return struct.pack(">I", len(data)) + kind + data + struct.pack(">I", zlib.crc32(kind + data))

    header = struct.pack(">IIBBBBB", pixels, pixels, 8, 6, 0, 0, 0)
    return (
        b"\x89PNG\r\n\x1a\n"
        + chunk(b"IHDR", header)
        + chunk(b"IDAT", zlib.compress(bytes(rows), 9))
        + chunk(b"IEND", b"")
    )


if __name__ == "__main__":
    with open("logo-svg.svg", "w", encoding="utf-8") as file:
        file.write(svg())
    for pixels in (32, 64):
        with open(f"logo-{pixels}x{pixels}.png", "wb") as file:
            file.write(png(pixels))
