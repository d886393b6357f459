"""Makes tiles.csv, the invented data of the demo notebooks.

A works makes clay roof tiles and fires them in three kilns: twelve batches a kiln, ten tiles a
batch, fourteen measurements a tile. Nothing here was measured; every number comes from the seed
below, so that anybody can make the same file again:

    python3 make_tiles.py             writes tiles.csv beside this script
    python3 make_tiles.py --check     writes nothing, exits 1 unless tiles.csv is what it would write

Only the standard library is used. The generator's `random()` is the one method whose sequence the
language promises to keep, and nothing but +, -, *, / is done to it, so that no library's own
rounding of a logarithm or a cosine can change the last digit on another machine.

Three causes that nobody measures stand behind the measurements:

    firing      how hot the tile was fired: shrinks it, makes it dense, strong and red
    moisture    how wet the clay was pressed: shrinks it in drying, lets it warp
    wear        how far the mould is worn: makes the tile thick, wide and twisted

The kilns differ in firing (north fires hottest, yard coldest) and in warp (yard heats unevenly).
Two batches went wrong: M05 was fired cold, and Y09 was pressed in a mould that should have been
replaced. Some measurements are missing, as they would be: a tile broke before its test, a
freezing cabinet was full, a colour head was out of order for one afternoon.
"""

import datetime
import pathlib
import random
import sys

SEED = 20250307
KILNS = {  # name: (letter of its batches, firing, extra warp in mm, day of its first batch)
    "north": ("N", 0.35, 0.0, datetime.date(2025, 3, 3)),
    "mill": ("M", 0.0, 0.1, datetime.date(2025, 3, 4)),
    "yard": ("Y", -0.4, 0.6, datetime.date(2025, 3, 6)),
}
BATCHES = 12
TILES = 10
COLD_BATCH = "M05"
WORN_BATCH = "Y09"
COLOUR_OUT_OF_ORDER = "N08"  # its last four tiles have no colour

MEASUREMENTS = {  # name: decimals written
    "length_mm": 1,
    "width_mm": 1,
    "thickness_mm": 2,
    "mass_g": 0,
    "warp_mm": 2,
    "twist_mm": 2,
    "bulk_density_g_cm3": 3,
    "water_absorption_pct": 2,
    "open_porosity_pct": 2,
    "breaking_load_n": 0,
    "modulus_of_rupture_mpa": 2,
    "frost_loss_pct": 2,
    "colour_lightness": 1,
    "colour_redness": 1,
}
MISSING = {  # name: share of tiles without it
    "water_absorption_pct": 0.03,
    "breaking_load_n": 0.04,
    "frost_loss_pct": 0.07,
    "twist_mm": 0.015,
}

SPAN_MM = 280.0  # between the supports of the bending test
PROFILE = 1.08  # a tile's clay over that of a flat plate of its length, width and thickness


def normal(source):
    """A draw with mean 0 and variance 1: twelve uniform draws, added up.

    Added one by one, because newer versions of the language round the built-in `sum` differently.
    """
    total = -6.0
    for _ in range(12):
        total += source.random()
    return total


def measure(source, firing, moisture, wear, extra_warp):
    """One tile's fourteen measurements, from its three causes and errors of its own."""
    error = lambda scale: scale * normal(source)
    length = 420.0 - 1.5 * firing - 1.7 * moisture + error(0.8)
    width = 250.0 - 0.8 * firing - 1.0 * moisture + 0.7 * wear + error(0.5)
    thickness = 14.0 - 0.08 * firing + 0.28 * wear + error(0.11)
    density = 1.95 + 0.034 * firing - 0.014 * moisture + error(0.011)
    absorption = 12.0 - 1.4 * firing + 0.45 * moisture + error(0.45)
    strength = 14.0 + 1.6 * firing - 0.5 * moisture + error(0.9)
    frost_root = 1.10 - 0.28 * firing + 0.05 * moisture + error(0.14)
    return {
        "length_mm": length,
        "width_mm": width,
        "thickness_mm": thickness,
        "mass_g": PROFILE * length * width * thickness * density / 1000.0 + error(14.0),
        "warp_mm": max(0.1, 2.3 + 0.65 * moisture + 0.2 * wear + extra_warp + error(0.4)),
        "twist_mm": max(0.05, 1.6 + 0.6 * wear + 0.15 * moisture + error(0.3)),
        "bulk_density_g_cm3": density,
        # Open porosity is water absorption times bulk density over that of water, measured anew.
        "open_porosity_pct": absorption * density + error(0.5),
        "water_absorption_pct": absorption,
        "modulus_of_rupture_mpa": strength,
        # A flat plate bent in the middle: load = strength * 2 * width * thickness^2 / (3 * span).
        "breaking_load_n": strength * 2.0 * width * thickness * thickness / (3.0 * SPAN_MM)
        + error(45.0),
        "frost_loss_pct": max(0.15, frost_root) * max(0.15, frost_root),
        "colour_lightness": 52.0 - 1.5 * firing + 0.4 * moisture + error(0.9),
        "colour_redness": 24.0 + 1.0 * firing + error(0.8),
    }


def tiles():
    """The rows of the table, in the order in which the tiles were pressed."""
    source = random.Random(SEED)
    number = 0
    for batch_idx in range(BATCHES):
        for kiln, (letter, kiln_firing, extra_warp, first_day) in KILNS.items():
            batch = f"{letter}{batch_idx + 1:02d}"
            day = first_day + datetime.timedelta(weeks=batch_idx)
            batch_firing = kiln_firing + 0.45 * normal(source)
            batch_moisture = 0.6 * normal(source)
            # A mould lasts six batches, and wears in each.
            batch_wear = 0.55 * (batch_idx % 6) - 1.4 + 0.15 * normal(source)
            if batch == COLD_BATCH:
                batch_firing = -3.4
            if batch == WORN_BATCH:
                batch_wear = 4.2
            for tile_idx in range(TILES):
                number += 1
                row = measure(
                    source,
                    batch_firing + 0.6 * normal(source),
                    batch_moisture + 0.4 * normal(source),
                    batch_wear + 0.25 * normal(source),
                    extra_warp,
                )
                for name, share in MISSING.items():
                    if source.random() < share:
                        row[name] = None
                if batch == COLOUR_OUT_OF_ORDER and tile_idx >= TILES - 4:
                    row["colour_lightness"] = row["colour_redness"] = None
                yield f"T{number:03d}", kiln, batch, day.isoformat(), row


def table():
    """The whole file as text."""
    lines = [",".join(["tile", "kiln", "batch", "date", *MEASUREMENTS])]
    for tile, kiln, batch, day, row in tiles():
        values = (
            "" if row[name] is None else f"{row[name]:.{decimals}f}"
            for name, decimals in MEASUREMENTS.items()
        )
        lines.append(",".join([tile, kiln, batch, day, *values]))
    return "\n".join(lines) + "\n"


def main(arguments):
    path = pathlib.Path(__file__).with_name("tiles.csv")
    made = table().encode("ascii")
    if arguments == ["--check"]:
        if path.read_bytes() != made:
            sys.exit(f"{path.name} is not what this script makes")
    elif arguments:
        sys.exit("usage: make_tiles.py [--check]")
    else:
        path.write_bytes(made)


if __name__ == "__main__":
    main(sys.argv[1:])
