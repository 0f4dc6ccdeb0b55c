"""The sample data that come with hologyre, made from three scenes."""

from __future__ import annotations

import tempfile
from functools import partial
from pathlib import Path

from hologyre.simulate.scene_files import refuse_existing, write_whole
from hologyre.simulate.scenes import write_scene

_README = """# Sample data: SIMULATIONS

Nothing here was measured. Every hologram was computed by hologyre from a field known in closed
form and a camera with noise, so that what is found can be held against the truth.

| file | what it holds |
|---|---|
| `drying_film.tif` | 40 frames of 384 x 384: a speckle field seen through a drying film |
| `truth_singularities.csv` | every zero of that field inside the frame, by frame |
| `truth_trajectories.csv` | the same zeros joined into tracks |
| `truth_events.csv` | births and deaths of pairs, entries and exits, with times between frames |
| `scene.json` | every setting: wave, camera, optics, seed |
| `charge_two.tif` | one frame of 256 x 256: a beam with a vortex of charge two |
| `weak_fringes.tif` | one frame of 256 x 256: speckle, fringes of visibility 0.2 |
| `charge_two.*`, `weak_fringes.*` | their truth (no tracks: one frame each) and settings |

All are 8 bit. The film: a developed speckle field of shortest wavelength 24 px that moves, slows
down and settles as the film dries; visibility 0.8, full well 10 000 electrons with 99.9 % of the
pixels below 0.9 of it, mild dust, three hot pixels, some defocus and astigmatism, a phase that
drifts and trembles a little.

## How they were made

    hologyre simulate drying-film --out DIR
    hologyre simulate charge-two --out DIR2
    hologyre simulate weak-fringes --out DIR3

The same commands give the same pixels and tables again. The whole folder:

    python -c "from hologyre.simulate.samples import write_samples; write_samples('DIR')"

## Conventions

Positions count from the centre of the first pixel, y down, x right, in pixels of the hologram;
they are rounded to 0.0001 px. Charge is +1 when the phase grows on a loop turning from +x towards
+y (clockwise on the screen). The field is what multiplies exp(+2 pi i (fy y + fx x)) in the
hologram, (fy, fx) being the carrier in cycles per pixel: (0.2189, 0.0411) for the film. Time
factor exp(-i w t). Lengths in um are in the object: the film is seen through a 50x objective
(aperture stopped down to 0.32) at 532 nm on pixels of 3.45 um, one frame every 2 s.

The truth comes from the formula of the field, never from the holograms or from hologyre's own
detectors. Files are OME-TIFF with lossless deflate.
"""


def write_samples(folder: str | Path) -> list[Path]:
    """Write the sample data into a folder.

    Parameters
    ----------
    folder : path
        Folder; made if missing.

    Returns
    -------
    list of Path
        The files written.

    Raises
    ------
    FileExistsError
        If one of the files is there already.
    """
    target = Path(folder)
    target.mkdir(parents=True, exist_ok=True)
    with tempfile.TemporaryDirectory() as work:
        film = write_scene("drying-film", Path(work) / "film")
        contents = {p.name: p.read_bytes() for p in film if p != film.readme}
        for name in ("charge-two", "weak-fringes"):
            single = write_scene(name, Path(work) / name)
            stem = single.stack.stem
            contents[single.stack.name] = single.stack.read_bytes()
            contents[f"{stem}.truth_singularities.csv"] = single.singularities.read_bytes()
            contents[f"{stem}.scene.json"] = single.settings.read_bytes()
    contents["README.md"] = _README.encode()
    paths = [target / name for name in contents]
    refuse_existing(paths)
    for path in paths:
        write_whole(path, partial(_fill, contents[path.name]))
    return paths


def _fill(content: bytes, path: Path) -> None:
    path.write_bytes(content)
