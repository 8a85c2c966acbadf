"""What the next colleague gets, in one folder: curves, table, solid, drawing, photometric files."""

from pathlib import Path

from inverse.export import dxf, lens_json, step, table
from inverse.export.atomic import write_text
from inverse.export.cad import CadMissing, SolidError
from inverse.formats import eulumdat, lm63
from inverse.formats.nameplate import Nameplate


def hand_over(
    folder,
    section,
    *,
    name,
    material_name,
    density,
    index,
    wavelength,
    stamp,
    far_field,
    flux,
    date,
    aperture_radius,
    lamp="LED",
    watts=0.0,
    run=None,
):
    """Write all files into ``folder`` (made when missing); returns (file names, notes about what is missing).

    ``density`` g/mm³ or None, ``index`` at ``wavelength`` µm, ``stamp`` word → value, ``far_field`` a
    `FarField`, ``flux`` lm the LED emits, ``date`` ISO, ``aperture_radius`` mm, ``lamp`` the LED in words,
    ``watts`` electrical (0 = not stated), ``run`` JSON-ready facts of the search kept in lens.json.
    A section that makes no sound solid is noted. Raises OSError.
    Without the CAD extra, and where the beam does not fit a format, the file is left out with a note.
    """
    folder = Path(folder)
    folder.mkdir(parents=True, exist_ok=True)
    files, notes = [], []
    heights = section.dense(200)[0][:, 1]
    plate = Nameplate(
        name=name,
        date=date,
        lamp=lamp,
        lamp_flux=flux,
        aperture_radius=aperture_radius,
        height=float(heights.max() - heights.min()),
        watts=watts,
        stamp=stamp,
    )
    made_of = {
        "material": material_name,
        "index": index,
        "wavelength_um": wavelength,
        "density_g_mm3": density,
    }
    facts = {"name": name, "stamp": stamp, "run": run} | made_of
    lens_json.write(folder / "lens.json", section, facts)
    table.write_profile(folder / "profile.csv", section, stamp=stamp)
    files += ["lens.json", "profile.csv"]
    try:
        step.write(
            folder / "lens.step",
            section,
            name=name,
            material=material_name,
            density=density,
            stamp=stamp,
            date=date,
        )
        files.append("lens.step")
    except SolidError as fault:
        notes.append(f"lens.step was not written, no sound solid: {fault}")
    except CadMissing as fault:
        notes.append(_left_out(folder / "lens.step", fault))
    dxf.write(
        folder / "lens.dxf",
        section,
        title=name,
        material=material_name,
        index=index,
        wavelength=wavelength,
        stamp=stamp,
    )
    files.append("lens.dxf")
    for file, format in (("beam.ies", lm63), ("beam.ldt", eulumdat)):
        try:
            write_text(folder / file, format.text(far_field, plate))
            files.append(file)
        except ValueError as fault:
            notes.append(_left_out(folder / file, fault))
    return files, notes


def _left_out(path, fault):
    """The note about a file that was not written; one from an earlier run is not this lens."""
    old = f" The {path.name} in the folder is from an earlier run." if path.exists() else ""
    return f"{path.name} was not written. {fault}{old}"
