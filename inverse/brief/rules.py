"""Which keys of one section go together: found from the keys that came, whatever their values.

So a brief with a wrong number *and* two contradicting keys hears of both at once.  ``came`` is a
section as TOML gave it.
"""

from inverse.brief.schema import MOST_DICE, SHAPE_SIZES

GRID = ("rows", "columns", "gap_mm")
EVERY_SIZE = tuple(size for sizes in SHAPE_SIZES.values() for size in sizes)
LAW_KEYS = {"law_power": "cosine_power", "law_table": "table", "law_table_file": "table"}
BEAMS = ("spot_diameter_mm", "half_angle_deg", "beam_angle_deg", "table", "table_file")


def exclusive(path, came, keys, complaints, *, needed=""):
    """At most one of ``keys``; exactly one when ``needed`` says what would be missing."""
    given = [key for key in keys if key in came]
    for key in given[1:]:
        complaints.add((*path, key), f"got both {given[0]} and {key}, wanted only one of them")
    if needed and not given:
        complaints.add(path, f"missing {' or '.join(keys)}, wanted {needed}")


def outline(path, came, complaints):
    """A die has a shape, the sizes of that shape and no others."""
    shape = came.get("shape")
    if "shape" not in came:
        complaints.add(path, f"missing shape, wanted one of {', '.join(SHAPE_SIZES)}")
    if not isinstance(shape, str) or shape not in SHAPE_SIZES:
        return  # a wrong word is reported by the section itself
    for size in EVERY_SIZE:
        if size in SHAPE_SIZES[shape] and size not in came:
            complaints.add(path, f"missing {size}, wanted the size of the {shape} in mm")
        elif size in came and size not in SHAPE_SIZES[shape]:
            wanted = " and ".join(SHAPE_SIZES[shape])
            complaints.add((*path, size), f"a {shape} has no {size}, wanted {wanted}")


def emitter(came, complaints):
    """One outline, a grid of it, or a list of dice; one law; a whole dome."""
    here = ("emitter",)
    if "die" in came:
        for key in ("shape", *EVERY_SIZE, *GRID):
            if key in came:
                complaints.add((*here, key), f"got {key} and [[emitter.die]], wanted only one of them")
        dice = came["die"] if isinstance(came["die"], list) else []
        for i, die in enumerate(dice[:MOST_DICE]):
            if isinstance(die, dict):
                outline((*here, "die", i), die, complaints)
    else:
        outline(here, came, complaints)
        grid(here, came, complaints)
    law(here, came, complaints)
    dome = came.get("dome")
    if isinstance(dome, dict):
        for key, meaning in (("index", "the index inside the dome"), ("radius_mm", "its radius in mm")):
            if key not in dome:
                complaints.add((*here, "dome"), f"missing {key}, wanted {meaning}")


def grid(here, came, complaints):
    """Several dice have a gap, one die has none, and there is a limit to their number."""
    counts = [came.get(key, 1) for key in ("rows", "columns")]
    if any(isinstance(count, bool) or not isinstance(count, int) or count < 1 for count in counts):
        return  # reported by the section itself
    number, gap = counts[0] * counts[1], came.get("gap_mm")
    if number > MOST_DICE:
        key = "rows" if "rows" in came else "columns"
        complaints.add((*here, key), f"got {number} dice, wanted at most {MOST_DICE}")
    if number > 1 and gap is None:
        complaints.add(here, "missing gap_mm, wanted the dark gap between dice in mm (0 if they touch)")
    if number == 1 and isinstance(gap, (int, float)) and gap > 0:
        complaints.add((*here, "gap_mm"), "got a gap for a single die, wanted rows or columns above 1")


def law(here, came, complaints):
    """The law's word and its numbers agree."""
    exclusive(here, came, tuple(LAW_KEYS), complaints)
    word = came.get("law")
    for key, needed in LAW_KEYS.items():
        if key in came and word in ("lambertian", "cosine_power", "table") and word != needed:
            complaints.add((*here, key), f'got {key} with law = "{word}", wanted law = "{needed}"')
    if word == "cosine_power" and "law_power" not in came:
        complaints.add((*here, "law"), "missing law_power, wanted the m of intensity = cos^m")
    if word == "table" and not {"law_table", "law_table_file"} & set(came):
        complaints.add((*here, "law"), "missing law_table or law_table_file, wanted one of them")


def lens(came, complaints):
    """One material, one wavelength, one aperture."""
    here = ("lens",)
    exclusive(here, came, ("material", "index"), complaints)
    exclusive(here, came, ("wavelength_nm", "wavelength_um"), complaints)
    exclusive(here, came, ("aperture_mm", "aperture_max_mm"), complaints, needed="the clear diameter in mm")


def target(came, complaints):
    """One kind of beam, and the key that completes it."""
    here = ("target",)
    exclusive(here, came, BEAMS, complaints, needed="the beam")
    if "spot_diameter_mm" in came and "distance_mm" not in came:
        complaints.add((*here, "spot_diameter_mm"), "missing distance_mm, wanted how far away it is")
    if "field_angle_deg" in came and "beam_angle_deg" not in came:
        complaints.add((*here, "field_angle_deg"), "missing beam_angle_deg, wanted it too")


def surroundings(came, complaints):
    """A port has one material, and stands before water only."""
    port = came.get("port")
    if port is not None and came.get("medium", "air") == "air":
        complaints.add(("surroundings", "port"), 'got a port in air, wanted medium = "water" with it')
    if isinstance(port, dict):
        exclusive(("surroundings", "port"), port, ("material", "index"), complaints)


RULES = {"emitter": emitter, "lens": lens, "target": target, "surroundings": surroundings}
