"""From a TOML file to a frozen ``Brief``: read, settle, cross-check, convert to mm and rad.

Each stage adds its complaints and the next goes on with the sections that are sound, so one reading
finds nearly all there is to find.
"""

import hashlib
import re
import tomllib
from dataclasses import dataclass, field
from pathlib import Path

from pydantic import ValidationError

from inverse import material as materials
from inverse.brief import convert, crosscheck, resolved, settle
from inverse.brief.complaints import Complaints
from inverse.brief.lines import positions
from inverse.brief.rules import RULES
from inverse.brief.schema import COMPULSORY, NAME, SECTIONS, known_keys
from inverse.brief.textfile import Unreadable, read_text
from inverse.brief.wanted import came
from inverse.emitter import Emitter
from inverse.material import Material
from inverse.profile.envelope import Envelope
from inverse.refine.plan import Plan
from inverse.target import Port, Surroundings, Target
from inverse.units import deg

DEEPEST = 200  # dots between two commas or brackets: tomllib's time for a dotted key grows with their square

CHECKS = (  # each with what it reads; skipped when that is not sound
    (crosscheck.dice, ("led",)),
    (crosscheck.dome, ("led",)),
    (crosscheck.foot, ("emitter", "lens")),
    (crosscheck.pocket, ("led", "lens", "mould")),
    (crosscheck.mould, ("lens", "mould")),
    (crosscheck.beam, ("target",)),
    (crosscheck.distance, ("lens", "target", "surroundings")),
    (crosscheck.water, ("lens", "target", "water_index")),
)


@dataclass(frozen=True)
class Brief:
    """What is wanted, complete and checked. Two briefs are equal when their resolved texts are."""

    name: str  # also the folder of the run
    emitter: Emitter = field(compare=False)
    material: Material = field(compare=False)  # its absorption is that of the brief
    wavelength: float = field(compare=False)  # µm
    index: float = field(compare=False)  # of the lens at the wavelength
    absorption: float = field(compare=False)  # of the lens, per mm
    envelope: Envelope = field(compare=False)
    aperture_is_maximum: bool = field(compare=False)  # True: the search may choose a smaller clear radius
    target: Target = field(compare=False)
    surroundings: Surroundings = field(compare=False)
    plan: Plan = field(compare=False)
    notes: tuple[str, ...] = field(compare=False)  # sentences worth reading that forbid nothing
    resolved: str = field(repr=False)  # TOML with every default, reads back to this brief
    digest: str = field(compare=False)  # SHA-256 of ``resolved``, hex


def read(path, *, effort=None):
    """The brief in the TOML file at ``path``; ``effort`` overrides search.effort.

    Raises BriefError with every fault found, each as ``file:line: key: what came, what was wanted``.
    """
    path = Path(path)
    try:
        text = read_text(path)
    except Unreadable as fault:
        complaints = Complaints(path)
        complaints.add((), str(fault), file=path, line=fault.line)
        complaints.raise_if_any()
    return parse(text, path, effort=effort)


def parse(text, path="brief.toml", *, effort=None):
    """The brief in ``text``; ``path`` names it in messages, and tables are looked for beside it."""
    path = Path(path)
    complaints = Complaints(path)
    data = _toml(text, complaints)
    complaints.raise_if_any()
    complaints.found = positions(text)
    if effort is not None and isinstance(data.setdefault("search", {}), dict):
        data["search"]["effort"] = effort
    _top(data, complaints)
    known = {title: _section(title, data, complaints) for title in SECTIONS}
    _settle(known, path.parent, complaints)
    for check, needs in CHECKS:
        if all(known.get(need) is not None for need in needs):
            check(*(known[need] for need in needs), complaints)
    complaints.raise_if_any()
    return _brief(data["name"], known)


def _toml(text, complaints):
    """The tables of ``text``, or None and a complaint with its line."""
    if not re.search(r"^[^\S\n]*[^#\s]", text, re.MULTILINE):
        complaints.add((), "the brief is empty, wanted at least name, [emitter], [lens] and [target]", line=1)
        return None
    if max(piece.count(".") for piece in re.split(r"[=#\[\]{},\n]", text)) > DEEPEST:
        complaints.add((), f"got more than {DEEPEST} dots in one key, wanted keys as in lens.index", line=1)
        return None
    try:
        return tomllib.loads(text)
    except RecursionError:
        complaints.add((), "brackets are nested too deeply, wanted at most rows within a table", line=1)
    except ValueError as fault:  # also a number of thousands of digits, which is no TOMLDecodeError
        place = re.search(r" \(at (?:line (\d+), column (\d+)|end of document)\)$", str(fault))
        line = int(place[1]) if place and place[1] else text.rstrip().count("\n") + 1 if place else 1
        column = f" (column {place[2]})" if place and place[2] else ""
        reason = str(fault)[: place.start()] if place else str(fault).split(":")[0]
        complaints.add((), f"not valid TOML: {reason}{column}", line=line)
    return None


def _top(data, complaints):
    """Unknown sections, and the name."""
    for key in data:
        if key not in known_keys(()):
            complaints.add((key,), None)
    if "name" not in data:
        complaints.add((), f"missing name, wanted {NAME.words}", line=1)
        return
    try:
        NAME(data["name"])
    except ValueError as fault:
        complaints.add(("name",), str(fault))


def _section(title, data, complaints):
    """One validated section, or None; an optional section left out has its defaults."""
    if title not in data and title in COMPULSORY:
        complaints.add((), f"missing section [{title}], wanted it", line=1)
        return None
    came_in = data.get(title, {})
    if not isinstance(came_in, dict):
        complaints.add((title,), f"got {came(came_in)}, wanted a section [{title}]")
        return None
    if title in RULES:
        RULES[title](came_in, complaints)
    try:
        section = SECTIONS[title].model_validate(came_in)
    except ValidationError as error:
        complaints.add_invalid((title,), error)
        return None
    return None if complaints.about(title) else section


def _settle(known, folder, complaints):
    """Settle the sound sections in ``known`` and add what follows from them; a faulty one becomes None."""

    def settle_one(title, how, *others):
        if known[title] is not None:
            known[title] = None if None in others else how(known[title], *others)
            if complaints.about(title):
                known[title] = None
        return known[title]

    emitter = settle_one("emitter", settle.emitter, folder, complaints)
    if emitter:
        known["led"] = convert.led(emitter)
    settle_one("target", settle.target, folder, complaints)
    surroundings = settle_one("surroundings", settle.surroundings)
    if known["lens"] is None:
        return
    material = convert.material(("lens",), known["lens"], settle.LENS_MATERIAL, complaints)
    known["material"] = material
    lens = settle_one("lens", settle.lens, emitter, material)
    if lens is None:
        return
    wavelength, here = lens.wavelength_nm / 1000.0, ("lens", "wavelength_nm")
    known["wavelength"] = wavelength
    known["index"] = convert.index(material, wavelength, here, complaints)
    port = surroundings.port if surroundings else None
    if port:
        substance = convert.material(("surroundings", "port"), port, settle.PORT_MATERIAL, complaints)
        known["port_index"] = substance and convert.index(substance, wavelength, here, complaints)
        water = materials.by_name("water")
        known["water_index"] = convert.index(water, wavelength, here, complaints)


def _brief(name, known):
    """The brief from sections without fault."""
    lens, index, port = known["lens"], known["index"], known["surroundings"].port
    target = convert.target(known["target"])
    around = Surroundings()
    remarks = {"lens.wavelength_nm": f"where the lens index is {index:.5f}"}
    if known["target"].spot_diameter_mm is not None:
        remarks["target.distance_mm"] = f"half-angle {deg(target.half_angle):.4f} deg"
    if port:
        window = Port(known["port_index"], port.thickness_mm, port.gap_mm)
        around = Surroundings("water", known["water_index"], window)
        remarks["surroundings.medium"] = f"index {around.index:.5f}"
    text = resolved.text(name, {title: known[title] for title in SECTIONS}, remarks)
    return Brief(
        name=name,
        emitter=known["led"],
        material=known["material"],
        wavelength=known["wavelength"],
        index=index,
        absorption=lens.absorption_per_mm,
        envelope=convert.envelope(lens, known["mould"]),
        aperture_is_maximum=lens.aperture_mm is None,
        target=target,
        surroundings=around,
        plan=convert.plan(known["search"]),
        notes=crosscheck.notes(index, target.half_angle, known.get("water_index")),
        resolved=text,
        digest=hashlib.sha256(text.encode()).hexdigest(),
    )
