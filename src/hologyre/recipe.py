"""Every setting of an analysis: validated, comparable, saved as TOML with comments."""

from __future__ import annotations

import difflib
from collections.abc import Iterator, Mapping
from pathlib import Path
from types import UnionType
from typing import Annotated, Any, Literal, Union, get_args, get_origin

import tomlkit
from pydantic import BaseModel, ConfigDict, Field, ValidationError, field_validator, model_validator
from pydantic.fields import FieldInfo
from tomlkit.exceptions import ParseError

from hologyre.optics import Optics

Auto = Literal["auto"]
Positive = Annotated[float, Field(gt=0, allow_inf_nan=False)]
NotNegative = Annotated[float, Field(ge=0, allow_inf_nan=False)]
Frequency = Annotated[float, Field(ge=-0.5, le=0.5)]
Radius = Annotated[float, Field(gt=0, le=0.5)]
Finite = Annotated[float, Field(allow_inf_nan=False)]


class RecipeError(ValueError):
    """Settings that cannot be used; one line, each setting named by its path."""


def frame_slice(text: str) -> slice:
    """Turn ``A:B`` or ``A:B:STEP`` into a slice of frame numbers.

    Raises
    ------
    ValueError
        If the text is not such a range, or a number in it is negative.
    """
    parts = text.split(":")
    try:
        numbers = [int(p) if p.strip() else None for p in parts]
    except ValueError:
        numbers = []
    ok = len(numbers) in (2, 3) and all(n is None or n >= 0 for n in numbers)
    if not ok or (len(numbers) == 3 and numbers[2] == 0):
        raise ValueError(f"expected A:B or A:B:STEP in frame numbers, got {text!r}")
    return slice(*numbers)


class _Section(BaseModel):
    model_config = ConfigDict(extra="forbid", frozen=True, validate_default=True)


class OpticsSettings(_Section):
    """The microscope."""

    wavelength_nm: Positive | None = Field(default=None, description="wavelength in vacuum, nm")
    pixel_um: Auto | Literal["unknown"] | Positive = Field(
        default="auto",
        description="pixel size in the object, um; auto: camera_pixel_um / magnification, or else "
        "what the file says",
    )
    camera_pixel_um: Positive | None = Field(
        default=None, description="pitch of the camera's pixels, um"
    )
    magnification: Positive | None = Field(default=None, description="from object to camera")
    medium_index: Positive = Field(default=1.0, description="refractive index around the object")
    numerical_aperture: Positive | None = Field(default=None, description="of the objective")
    frame_interval_s: Auto | Literal["unknown"] | Positive = Field(
        default="auto", description="time between frames, s; auto: what the file says"
    )

    @model_validator(mode="after")
    def _aperture_fits(self) -> OpticsSettings:
        if self.numerical_aperture is not None and self.numerical_aperture >= self.medium_index:
            raise ValueError(
                f"numerical_aperture {self.numerical_aperture} must be below medium_index "
                f"{self.medium_index}"
            )
        return self

    def values(self) -> Optics:
        """Return what is known, "auto" taken for unknown."""
        magnification, camera = self.magnification, self.camera_pixel_um
        if not isinstance(self.pixel_um, str):
            # the pixel in the object is what counts; these two only explain it
            magnification = magnification or 1.0
            camera = self.pixel_um * magnification
        interval = None if isinstance(self.frame_interval_s, str) else self.frame_interval_s
        return Optics(
            wavelength_nm=self.wavelength_nm,
            camera_pixel_um=camera,
            magnification=magnification,
            medium_index=self.medium_index,
            numerical_aperture=self.numerical_aperture,
            frame_interval_s=interval,
        )


class LeftOut(_Section):
    """A frame that is not used, and why."""

    frame: int = Field(ge=0, description="the stack's own frame number")
    reason: str = Field(default="left out by hand", description="why it is not used", min_length=1)


class StackSettings(_Section):
    """Which frames and pixels are used, and the blank frames."""

    frames: str = Field(
        default=":", description="A:B or A:B:STEP, frame numbers from 0, B not included; : for all"
    )
    left_out: tuple[LeftOut, ...] = Field(
        default=(), description="frames not used, with the reason"
    )
    region: tuple[int, int, int, int] | None = Field(
        default=None,
        description="y_first, y_end, x_first, x_end: the pixels used, ends not included",
    )
    dark: str | None = Field(default=None, description="image with both beams blocked")
    reference: str | None = Field(default=None, description="image of the reference beam alone")
    empty: str | None = Field(default=None, description="hologram of both beams without the object")
    saturation: Auto | Literal["none"] | Positive = Field(
        default="auto",
        description="counts from which a pixel is saturated; auto: where the frames' values stop",
    )
    notes: str = Field(default="", description="anything worth keeping with the result")

    @field_validator("frames")
    @classmethod
    def _is_range(cls, value: str) -> str:
        frame_slice(value)
        return value

    @field_validator("region")
    @classmethod
    def _is_region(
        cls, value: tuple[int, int, int, int] | None
    ) -> tuple[int, int, int, int] | None:
        if value is not None and not (
            0 <= value[0] <= value[1] - 32 and 0 <= value[2] <= value[3] - 32
        ):
            raise ValueError("expected y_first, y_end, x_first, x_end, 32 pixels or more apart")
        return value


class CarrierSettings(_Section):
    """The fringes' frequency and the width of the sideband."""

    fy: Auto | Frequency = Field(default="auto", description="cycles per pixel along y")
    fx: Auto | Frequency = Field(default="auto", description="cycles per pixel along x")
    radius: Auto | Radius = Field(
        default="auto",
        description="of the sideband, cycles per pixel; its inverse is the finest detail",
    )
    conjugate: bool = Field(
        default=False, description="read the other sideband: flips every charge and the phase"
    )


class FieldSettings(_Section):
    """How complex fields are read from holograms."""

    edges: Literal["plain", "taper", "fit"] = Field(
        default="fit",
        description="how the ends of the frame are met: fit (to the frame's own pixels, best), "
        "taper, plain (quickest)",
    )
    window: Literal["disc", "hann"] = Field(default="disc", description="filter on the sideband")
    precision: Literal["single", "double"] = Field(
        default="single", description="of the field's numbers"
    )

    @model_validator(mode="after")
    def _fit_takes_disc(self) -> FieldSettings:
        if self.edges == "fit" and self.window != "disc":
            raise ValueError('edges "fit" takes the window "disc"')
        return self


class CompensationSettings(_Section):
    """A smooth phase surface taken out of every frame; singularities stay where they are."""

    family: Literal["none", "tilt", "polynomial", "zernike"] = Field(
        default="none", description="terms of the surface: none, tilt, polynomial, zernike"
    )
    order: Annotated[int, Field(ge=1)] = Field(default=2, description="highest order of its terms")
    method: Literal["gradient", "likelihood"] = Field(
        default="gradient",
        description="gradient: for smooth objects, quick; likelihood: for speckle, slow",
    )


class RefocusSettings(_Section):
    """Numerical refocusing."""

    distance_um: Finite = Field(default=0.0, description="in object space, um; 0: none")


class PhaseSettings(_Section):
    """Unwrapping."""

    weight: Literal["none", "amplitude"] = Field(
        default="none", description="what makes cutting cheap: none, or low amplitude"
    )


class SingularitySettings(_Section):
    """Locating phase singularities."""

    margin_px: NotNegative = Field(
        default=0.0, description="singularities nearer than this to the frame's border are not kept"
    )


class MotionSettings(_Section):
    """Linking singularities from frame to frame."""

    method: Literal["mixed", "threads", "assignment"] = Field(
        default="mixed",
        description="threads: follow the lines of zeros between frames; assignment: by position "
        "alone; mixed: threads wherever the frames are close enough in time",
    )
    max_step_px: Auto | Positive = Field(
        default="auto", description="longest step between two frames, px"
    )
    max_gap: Annotated[int, Field(ge=0)] = Field(
        default=2, description="most frames a singularity may go unseen in"
    )


class Recipe(_Section):
    """Settings of a whole analysis, an immutable value.

    "auto" stands for what `hologyre.survey` finds out from the stack. Defaults are those of
    the functions that take the settings.
    """

    optics: OpticsSettings = OpticsSettings()
    stack: StackSettings = StackSettings()
    carrier: CarrierSettings = CarrierSettings()
    field: FieldSettings = FieldSettings()
    compensation: CompensationSettings = CompensationSettings()
    refocus: RefocusSettings = RefocusSettings()
    phase: PhaseSettings = PhaseSettings()
    singularities: SingularitySettings = SingularitySettings()
    motion: MotionSettings = MotionSettings()

    def with_settings(self, settings: Mapping[str, Any]) -> Recipe:
        """Return a recipe with some settings changed.

        Parameters
        ----------
        settings : mapping
            From paths to values, as ``{"carrier.radius": 0.05}``.

        Raises
        ------
        RecipeError
            If a path is unknown or a value is not taken.
        """
        values = self.model_dump()
        for path, value in settings.items():
            section, _, name = path.partition(".")
            if section not in values or not name:
                raise RecipeError(f"{path}: unknown setting")
            values[section] = {**values[section], name: value}
        return recipe_of(values)

    def undecided(self) -> tuple[str, ...]:
        """Return the paths of the settings that are still "auto"."""
        return tuple(
            f"{name}.{key}"
            for name, section in self.model_dump().items()
            for key, value in section.items()
            if value == "auto"
        )


def recipe_of(settings: Mapping[str, Any], *, name: str = "") -> Recipe:
    """Make a recipe of nested mappings, all errors told at once, each by its path.

    Raises
    ------
    RecipeError
        If a setting is unknown or its value is not taken.
    """
    try:
        return Recipe.model_validate(settings)
    except ValidationError as error:
        told = "; ".join(dict.fromkeys(_messages(error)))
        raise RecipeError(f"{name}: {told}" if name else told) from error


def load_recipe(path: str | Path) -> Recipe:
    """Read a recipe from a TOML file; what the file leaves out keeps its default.

    Raises
    ------
    RecipeError
        If the file is missing, is not TOML, or holds a setting that is unknown or not taken.
    """
    path = Path(path)
    try:
        settings = tomlkit.parse(path.read_text(encoding="utf-8")).unwrap()
    except (OSError, UnicodeDecodeError) as error:
        reason = error.strerror if isinstance(error, OSError) else "it is not UTF-8 text"
        raise RecipeError(f"{path}: the recipe cannot be read: {reason}.") from error
    except ParseError as error:
        raise RecipeError(f"{path}: this is not a TOML file: {error}.") from error
    return recipe_of(settings, name=str(path))


def save_recipe(recipe: Recipe, path: str | Path) -> None:
    """Write a recipe as TOML, each setting with a comment that says what it is."""
    Path(path).write_text(recipe_text(recipe), encoding="utf-8", newline="\n")


def recipe_text(recipe: Recipe) -> str:
    """Return the recipe as TOML, each setting with a comment that says what it is."""
    document = tomlkit.document()
    document.add(tomlkit.comment("hologyre recipe. A setting behind # is not set."))
    for name, info in Recipe.model_fields.items():
        section: BaseModel = getattr(recipe, name)
        table = tomlkit.table()
        table.add(tomlkit.comment((info.annotation.__doc__ or "") if info.annotation else ""))
        tables: list[tuple[str, Any]] = []
        for key, entry in type(section).model_fields.items():
            value = section.model_dump()[key]
            table.add(tomlkit.nl())
            table.add(tomlkit.comment(entry.description or key))
            if value is None or value == ():
                table.add(tomlkit.comment(f"{key} ="))
            elif isinstance(value, tuple) and isinstance(value[0], dict):
                table.add(tomlkit.comment(f"{key}: see below"))
                rows = tomlkit.aot()
                for row in value:
                    rows.append(tomlkit.item(row))
                tables.append((key, rows))
            else:
                table.add(key, list(value) if isinstance(value, tuple) else value)
        for key, rows in tables:
            table.add(key, rows)
        document.add(tomlkit.nl())
        document.add(name, table)
    return tomlkit.dumps(document)


def _messages(error: ValidationError) -> Iterator[str]:
    for one in error.errors():
        where, info, model = _setting(one["loc"])
        if one["type"] == "extra_forbidden":
            name = str(one["loc"][-1])
            near = difflib.get_close_matches(name, model.model_fields, 1)
            known = (
                f"did you mean {near[0]}?" if near else f"known: {', '.join(model.model_fields)}"
            )
            yield f"{'.'.join([*where, name])}: unknown setting ({known})"
        elif one["type"] == "missing":
            yield f"{'.'.join(where)}: is missing"
        elif one["type"] == "value_error":
            yield f"{'.'.join(where)}: {one['msg'].removeprefix('Value error, ')}"
        else:
            takes = "a table of settings" if info is None else _words(info)
            yield f"{'.'.join(where) or 'recipe'}: expected {takes}, got {one.get('input')!r}"


def _setting(
    loc: tuple[int | str, ...],
) -> tuple[list[str], FieldInfo | None, type[BaseModel]]:
    """Follow an error's place to the setting: its path, what it takes, the model it is in.

    Pydantic puts the member of the union it tried into the place; these are left out.
    """
    path: list[str] = []
    info: FieldInfo | None = None
    inner: type[BaseModel] = Recipe
    for part in loc:
        if isinstance(part, int):
            path.append(str(part))
        elif part in inner.model_fields:
            info = inner.model_fields[part]
            path.append(part)
            kinds = [info.annotation, *get_args(info.annotation)]
            inner = next((k for k in kinds if _is_model(k)), inner)
    return path, None if info is None or _is_model(info.annotation) else info, inner


def _is_model(kind: Any) -> bool:
    return isinstance(kind, type) and issubclass(kind, BaseModel)


def _words(info: FieldInfo) -> str:
    """Say in words what a setting takes."""
    return _kind_words(info.annotation, tuple(info.metadata))


def _kind_words(kind: Any, limits: tuple[Any, ...] = ()) -> str:
    origin, inside = get_origin(kind), get_args(kind)
    if origin is Annotated:
        return _kind_words(inside[0], tuple(inside[1:]))
    if origin in (Union, UnionType):
        return " or ".join(_kind_words(a, limits) for a in inside if a is not type(None))
    if origin is Literal:
        return " or ".join(f'"{a}"' for a in inside)
    if origin is tuple:
        many = "" if Ellipsis in inside else f"{len(inside)} "
        what = "tables" if _is_model(inside[0]) else _kind_words(inside[0]) + "s"
        return f"a list of {many}{what.removeprefix('a ')}"
    bounds = [
        f"{word} {getattr(bound, name)}"
        for limit in limits
        for bound in (getattr(limit, "metadata", None) or [limit])
        for name, word in (("gt", "above"), ("ge", "from"), ("lt", "below"), ("le", "up to"))
        if getattr(bound, name, None) is not None
    ]
    word = {float: "a number", int: "a whole number", str: "a text", bool: "true or false"}
    return " ".join([word.get(kind, str(kind)), *bounds])
