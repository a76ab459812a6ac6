"""Makes the picture of README.md: one row of closed and one of opened stages, from the pictures in a sheet.

usage: python3 out-examples/strip.py SET/sheet.html out-examples/starter-set.png

Needs nothing but Python. Reads 8-bit PNG with a palette, as the sheet has them, and halves them.
"""

import base64
import re
import struct
import sys
import zlib


def decode(png):
    """Rows of (r, g, b) of an 8-bit palette or RGB PNG without interlace."""
    place, data, palette = 8, b"", None
    while place < len(png):
        (size,), kind = struct.unpack(">I", png[place : place + 4]), png[place + 4 : place + 8]
        body = png[place + 8 : place + 8 + size]
        if kind == b"IHDR":
            width, height, depth, colour, _, _, interlace = struct.unpack(">IIBBBBB", body)
            if depth != 8 or colour not in (2, 3) or interlace:
                sys.exit(f"a PNG of depth {depth}, colour type {colour} is not read here")
        elif kind == b"PLTE":
            palette = [tuple(body[i : i + 3]) for i in range(0, size, 3)]
        elif kind == b"IDAT":
            data += body
        place += size + 12
    unit = 3 if colour == 2 else 1
    raw, rows, above = zlib.decompress(data), [], bytes(width * unit)
    for y in range(height):
        start = y * (width * unit + 1)
        method, line = raw[start], bytearray(raw[start + 1 : start + 1 + width * unit])
        for x in range(width * unit):
            left = line[x - unit] if x >= unit else 0
            corner = above[x - unit] if x >= unit else 0
            line[x] = (line[x] + predicted(method, left, above[x], corner)) & 255
        above = bytes(line)
        rows.append([palette[i] for i in line] if palette else list(zip(line[::3], line[1::3], line[2::3])))
    return rows


def predicted(method, left, up, corner):
    if method == 4:
        distances = [abs(up - corner), abs(left - corner), abs(left + up - 2 * corner)]
        return [left, up, corner][distances.index(min(distances))]
    return [0, left, up, (left + up) // 2][method]


def halved(rows):
    def mean(y, x):
        four = [rows[2 * y][2 * x], rows[2 * y][2 * x + 1], rows[2 * y + 1][2 * x], rows[2 * y + 1][2 * x + 1]]
        return tuple((sum(p[c] for p in four) + 2) // 4 for c in range(3))

    return [[mean(y, x) for x in range(len(rows[0]) // 2)] for y in range(len(rows) // 2)]


def encode(rows):
    def chunk(kind, body):
        return struct.pack(">I", len(body)) + kind + body + struct.pack(">I", zlib.crc32(kind + body))

    lines = []
    for row in rows:
        line = bytes(c for p in row for c in p)
        lines.append(b"\x01" + bytes((line[i] - (line[i - 3] if i >= 3 else 0)) & 255 for i in range(len(line))))
    head = struct.pack(">IIBBBBB", len(rows[0]), len(rows), 8, 2, 0, 0, 0)
    data = zlib.compress(b"".join(lines), 9)
    return b"\x89PNG\r\n\x1a\n" + chunk(b"IHDR", head) + chunk(b"IDAT", data) + chunk(b"IEND", b"")


def main(sheet, picture):
    text = open(sheet, encoding="utf-8").read()
    strips = []
    for view in ["portrait", "opened"]:
        found = []
        for tag in re.findall(r"<img[^>]*>", text):
            data = re.search(r'src="data:image/png;base64,([^"]+)"', tag)
            if data and re.search(rf'alt="Stage [^"]*: {view},', tag):
                found.append(halved(decode(base64.b64decode(data.group(1)))))
        if not found:
            sys.exit(f"{sheet} has no pictures called {view}")
        strips += [[p for part in line for p in part] for line in zip(*found)]
    with open(picture, "wb") as out:
        out.write(encode(strips))


main(*sys.argv[1:3]) if len(sys.argv) == 3 else sys.exit(__doc__)
