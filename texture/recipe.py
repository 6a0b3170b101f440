"""What the user asked for: one frozen, typed tree of settings, checked once and then trusted.

Every setting that stands here acts; there are no reserved words. Descriptions are kept beside the
fields so that help, reference and code cannot part. Reading a file into this tree, with its overrides
and error lines, is the neighbouring module `texture.recipe_file`.
"""

from __future__ import annotations

import datetime as dt
from pathlib import Path
from typing import Annotated, Any, Literal

from pydantic import BaseModel, ConfigDict, Field, field_validator, model_validator

__all__ = [
    "Bed",
    "BedClass",
    "Composition",
    "Erosion",
    "Grain",
    "Intake",
    "Inventory",
    "Join",
    "Layer",
    "Method",
    "Mobility",
    "Outputs",
    "Packing",
    "Recipe",
    "Rim",
    "Samples",
    "TargetSettings",
    "Validation",
    "Void",
    "WaterColumn",
    "WaterSettings",
]

Fraction = Annotated[float, Field(ge=0.0, le=1.0)]
Positive = Annotated[float, Field(gt=0.0)]

COLUMN_ROLES = (
    "id", "survey", "date", "latitude", "latitude_minutes", "latitude_seconds", "latitude_hemisphere", "longitude",
    "longitude_minutes", "longitude_seconds", "longitude_hemisphere", "easting", "northing", "zone", "position", "depth",
    "sample_interval", "sample_top", "sample_bottom", "mud", "sand", "gravel", "silt", "clay", "mud_tare",
    "sand_tare", "gravel_tare", "split_factor", "median_size", "description", "remarks",
)  # fmt: skip


class Settings(BaseModel):
    """Base of all blocks: immutable, and an unknown key is an error."""

    model_config = ConfigDict(frozen=True, extra="forbid", populate_by_name=True, allow_inf_nan=False)


class Join(Settings):
    """Where the positions stand if the samples block names a table of results without them."""

    sheet: str | None = Field(None, description="sheet of the positions; the first that has them if absent")
    file: Path | None = Field(None, description="file of the positions; the same workbook if absent")
    on: str | None = Field(None, description="heading of the id among the positions; recognised if absent")


class Samples(Settings):
    """One `[[samples]]` block: one file, and what has to be known to read it."""

    file: Path = Field(description="spreadsheet or text table, relative to the recipe")
    sheet: str | None = Field(None, description="sheet name; the first sheet with a table if absent")
    survey: str | None = Field(None, description="name of the survey; the file's stem if absent")
    crs: str | None = Field(None, description="EPSG code or WKT of the positions; longitude and latitude if absent")
    hemisphere: Literal["", "N", "S", "E", "W", "NE", "NW", "SE", "SW"] = Field(
        "", description="half of the globe of degrees that carry neither sign nor letter; north and east if empty"
    )
    degrees: Literal["decimal", "minutes"] = Field(
        "decimal", description='what 54.30 says: degrees with decimals, or 54 degrees and 30 minutes if "minutes"'
    )
    basis: Literal["whole", "below_2mm"] = Field(
        "whole", description="whether the laboratory saw the whole sample or only what passed 2 mm"
    )
    method: Literal["sieve", "laser", "pipette"] = Field(
        "sieve", description="how the fractions were measured; becomes the kind of the stations"
    )
    blank_means: Literal["not_measured", "zero"] = Field("not_measured", description="what an empty fraction cell says")
    unit: Literal["auto", "fraction", "percent"] = Field(
        "auto", description="unit of the fraction columns; found from the rows' sums if `auto`"
    )
    join: Join | None = Field(None, description="the table of positions; found in the same workbook if absent")
    header_row: Annotated[int, Field(ge=1)] | None = Field(
        None, description="row number of the first header line, as the spreadsheet shows it"
    )
    layout: Literal["auto", "rows", "columns", "certificates"] = Field(
        "auto",
        description="whether samples are rows, columns, or certificates (one a sheet, or stacked); found if `auto`",
    )
    skip: tuple[Annotated[int, Field(ge=1)], ...] = Field(
        (), description="row numbers, as the spreadsheet shows them, that are neither headings nor samples"
    )
    split_below_mm: Positive | None = Field(
        None, description="size below which the split factor counts, where its heading does not say"
    )
    from_: dt.date | None = Field(None, alias="from", description="first day of the survey")
    to: dt.date | None = Field(None, description="last day of the survey")
    columns: dict[str, str] = Field(
        default_factory=dict, description="role = heading, only where recognition needs help"
    )

    @model_validator(mode="after")
    def _known_roles(self) -> Samples:
        for role in self.columns:
            if role not in COLUMN_ROLES:
                raise ValueError(f"columns.{role}: unknown role; {_nearest(role, COLUMN_ROLES)}")
        return self


class Void(Settings):
    """A place where older samples no longer hold: dredged, filled, or covered since."""

    polygon: tuple[tuple[float, float], ...] = Field(
        min_length=3, description="corners as [longitude, latitude] in degrees of WGS 84"
    )
    date: dt.date = Field(description="day of the change; samples taken before it are set aside")
    reason: Annotated[str, Field(min_length=1)] = Field(
        "dredging", description="what happened, for the account of rows"
    )


class Intake(Settings):
    """What counts as a usable row."""

    sum_tolerance: Annotated[float, Field(gt=0.0, lt=0.5)] = Field(
        0.02, description="rows whose parts sum outside 1 ± this are set aside"
    )
    mud_below_mm: Positive = Field(0.063, description="cut between mud and sand for columns of size classes")
    gravel_above_mm: Positive = Field(2.0, description="cut between sand and gravel for columns of size classes")
    surface_m: Positive = Field(0.10, description="samples that begin deeper than this are not the surface")
    noise_per_decade: Annotated[float, Field(ge=0.0, le=0.5)] = Field(
        0.0, description="fractions of 1 by which samples are known less well for each decade before the latest"
    )
    void: tuple[Void, ...] = Field((), description="places and days before which samples are set aside")
    on_land: Literal["snap", "drop", "keep"] = Field(
        "snap",
        description="stations on land: move to the nearest wet cell within one cell, set aside, or keep",
    )


class Composition(Settings):
    """The parts of the bed and the coordinates they are mapped in."""

    parts: tuple[str, ...] = Field(("mud", "sand", "gravel"), description="parts, finest first")
    logratio: Literal["tree", "ilr", "alr", "shares"] = Field("tree", description="kind of coordinates")
    tree: Any = Field(None, description='nested pairs, who is split from whom, e.g. ["mud", ["gravel", "sand"]]')
    zeros: Literal["auto", "replace", "censor", "presence"] = Field(
        "auto", description="treatment of parts below the detection limit; held-out error picks if `auto`"
    )
    detection_limit: Annotated[float, Field(gt=0.0, lt=1.0 / 3.0)] = Field(
        0.005, description="fractions below this are taken as below detection; replacement may take a higher limit"
    )

    @model_validator(mode="after")
    def _parts_we_can_read(self) -> Composition:
        if self.parts != ("mud", "sand", "gravel"):
            raise ValueError('parts: only ["mud", "sand", "gravel"] can be read from sample tables')
        return self

    @model_validator(mode="after")
    def _zeros_fit_the_coordinates(self) -> Composition:
        kinds = {"auto": None, "replace": ("tree", "ilr", "alr"), "censor": ("tree", "alr"), "presence": ("tree",)}
        allowed = kinds[self.zeros]
        if allowed is not None and self.logratio not in allowed:
            raise ValueError(
                f'zeros: "{self.zeros}" works with logratio = {" or ".join(allowed)}, found "{self.logratio}"'
            )
        return self


class TargetSettings(Settings):
    """The cells to fill: a grid file, or bounds with a cell size."""

    file: Path | None = Field(
        None, description="CF or UGRID NetCDF grid, GeoTIFF template, or a table or vector file of places"
    )
    bounds: tuple[float, float, float, float] | None = Field(None, description="west, south, east, north in `crs`")
    cell_size: Positive | None = Field(None, description="side of a square cell in units of `crs`")
    crs: str | None = Field(None, description="EPSG code or WKT of the grid; read from the file if absent")
    mask: str | None = Field(None, description="mask variable, where CF attributes do not tell")
    longitude: str | None = Field(
        None, description="variable of cell-centre longitudes, where CF attributes do not tell"
    )
    latitude: str | None = Field(None, description="variable of cell-centre latitudes, where CF attributes do not tell")
    depth: str | None = Field(None, description="variable of water depth, where CF attributes do not tell")
    location: Literal["face", "node"] = Field("face", description="where on a mesh the bed is wanted")
    halo_cells: Annotated[int, Field(ge=0, le=8)] = Field(
        0, description="outer rows and columns of a grid that repeat their neighbours and get no bed of their own"
    )
    points_per_cell: Literal["auto"] | Annotated[int, Field(ge=1, le=64)] = Field(
        "auto", description="points inside a cell that its value is averaged over (1, 4, 9, …)"
    )
    land: Path | None = Field(None, description="land polygons (GeoJSON, GeoPackage, Shapefile)")
    inlet_width_m: Literal["auto"] | Annotated[float, Field(ge=0.0)] = Field(
        "auto", description="narrower openings are river inlets, not sea; a tenth of the widest if `auto`"
    )

    @model_validator(mode="after")
    def _one_kind(self) -> TargetSettings:
        if (self.file is None) == (self.bounds is None):
            raise ValueError("give either file, or bounds with cell_size and crs")
        if self.bounds is not None:
            if self.cell_size is None or self.crs is None:
                raise ValueError("bounds need cell_size and crs beside them")
            west, south, east, north = self.bounds
            if not (west < east and south < north):
                raise ValueError(f"bounds are west, south, east, north; found {list(self.bounds)}")
        if self.points_per_cell != "auto" and round(self.points_per_cell**0.5) ** 2 != self.points_per_cell:
            raise ValueError(f"points_per_cell is 1, 4, 9, 16 …; found {self.points_per_cell}")
        return self


MethodName = Literal["mean", "nearest", "inverse_distance", "kriging"]


class Method(Settings):
    """How values travel from stations to cells."""

    name: MethodName = Field("kriging", description="method of the map")
    neighbours: Annotated[int, Field(ge=4, le=500)] = Field(32, description="stations around a point")
    neighbourhood: Literal["tile", "nearest"] = Field(
        "tile", description="one neighbourhood for each small tile, or exactly `neighbours` for each point"
    )
    fit: Literal["likelihood", "variogram"] = Field("likelihood", description="how the covariance is fitted")
    estimate: Literal["mean", "median"] = Field(
        "mean", description="expected fraction, or back-transform of the kriged coordinates"
    )


class Validation(Settings):
    """How the map's error is found out."""

    folds: Literal["matched", "random", "blocks", "each"] = Field("matched", description="how stations are held out")
    count: Annotated[int, Field(ge=2, le=100)] = Field(10, description="number of folds")
    compare: tuple[MethodName, ...] = Field(
        ("nearest", "inverse_distance", "kriging"), description="methods validated beside the chosen one"
    )


class Grain(Settings):
    """The grain itself."""

    diameter_m: Positive | None = Field(None, description="median diameter in metres")
    density_kg_m3: Annotated[float, Field(gt=1000.0, lt=10000.0)] = Field(2650.0, description="grain density")


class WaterColumn(Settings):
    """How the class behaves in the water."""

    settling_velocity_m_s: Positive | None = Field(
        None, description="settling velocity; computed for grains above 63 µm"
    )
    effective_density_kg_m3: Annotated[float, Field(gt=0.0, lt=1700.0)] | None = Field(
        None, description="of flocs: by how much they are denser than the water"
    )


class Erosion(Settings):
    """How the class leaves the bed."""

    critical_stress_pa: Positive | None = Field(None, description="critical stress; computed for grains above 63 µm")
    rate: Positive | None = Field(None, description="erosion rate, in the unit that `form` tells")
    form: Literal["excess_ratio", "excess_stress"] = Field(
        "excess_ratio", description="excess_ratio: kg m-2 s-1; excess_stress: kg m-2 s-1 Pa-1"
    )


class Packing(Settings):
    """How the class lies in the bed."""

    dry_density_kg_m3: Annotated[float, Field(gt=0.0, lt=5000.0)] | None = Field(
        None, description="dry mass in a volume of bed of this class alone; from its diameter if absent"
    )


class BedClass(Settings):
    """One sediment class of the model, a share of one part."""

    name: Annotated[str, Field(pattern=r"^[A-Za-z][A-Za-z0-9_]*$")] = Field(description="name of the class")
    part: str = Field(description="part of the map that it is a share of")
    share: Fraction = Field(
        1.0,
        description="share of that part; the shares of a part sum to 1; flocs have none in the bed unless it is set",
    )
    kind: Literal["grain", "floc"] = Field("grain", description="single grains, or flocs with given properties")
    grain: Grain = Field(default_factory=Grain)
    water_column: WaterColumn = Field(default_factory=WaterColumn)
    erosion: Erosion = Field(default_factory=Erosion)
    packing: Packing = Field(default_factory=Packing)

    @model_validator(mode="before")
    @classmethod
    def _flocs_settle_later(cls, given: Any) -> Any:
        if isinstance(given, dict) and given.get("kind") == "floc":
            return {"share": 0.0, **given}
        return given

    @model_validator(mode="after")
    def _effective_density_of_flocs(self) -> BedClass:
        if self.kind == "grain" and self.water_column.effective_density_kg_m3 is not None:
            raise ValueError('water_column.effective_density_kg_m3: is of flocs; set kind = "floc", or leave it out')
        return self


class Layer(Settings):
    """One layer of the bed, from the top."""

    thickness_m: Positive = Field(description="thickness where the bed is erodible")
    fill: Literal["same"] | dict[str, Fraction] = Field(
        "same",
        description='"same" as the map, or a composition in parts or in classes, such as { sand = 0.9, mud = 0.1 }',
    )
    critical_stress_pa: dict[str, Positive] = Field(
        default_factory=dict,
        description="of classes in this layer instead of their own: soft above, consolidated below",
    )
    dry_density_kg_m3: Annotated[float, Field(gt=0.0, lt=5000.0)] | None = Field(
        None, description='dry density of the layer, for packing = "layer"'
    )


class WaterSettings(Settings):
    """The water that grains settle in."""

    temperature_c: Annotated[float, Field(ge=-2.0, le=40.0)] = Field(10.0, description="temperature")
    salinity: Annotated[float, Field(ge=0.0, le=42.0)] = Field(35.0, description="practical salinity")


def _default_classes() -> tuple[BedClass, ...]:
    return (
        BedClass(name="mud", part="mud", grain=Grain(diameter_m=20e-6)),
        BedClass(name="sand", part="sand", grain=Grain(diameter_m=250e-6)),
        BedClass(name="gravel", part="gravel", grain=Grain(diameter_m=8e-3)),
    )


class Bed(Settings):
    """Layers and classes of the model's bed."""

    least_fraction: Annotated[float, Field(ge=0.0, lt=0.2)] = Field(
        0.005, description="smaller class fractions become zero and the cell is closed again"
    )
    land_thickness_m: Annotated[float, Field(ge=0.0)] = Field(
        0.0, description="erodible thickness given to each layer of land cells"
    )
    land_fill: Literal["nearest"] | dict[str, Fraction] = Field(
        "nearest", description='bed of land cells: of the "nearest" water, or a composition in parts or in classes'
    )
    minimum_thickness_m: Annotated[float, Field(ge=0.0)] = Field(
        0.0, description="no layer is thinner than this, on land neither: for models that divide by it"
    )
    packing: Literal["mixture", "class", "layer"] = Field(
        "mixture",
        description="dry density: from the mixture's median diameter (Wu & Wang 2006), from the classes' own (volumes add "
        "up, Colby 1963), or given for each layer",
    )
    hiding: Literal["none", "wu"] = Field(
        "none", description="small grains shelter behind large ones: not at all, or by Wu, Wang & Jia (2000)"
    )
    water: WaterSettings = Field(default_factory=WaterSettings)
    layers: tuple[Layer, ...] = Field((Layer(thickness_m=0.10),), min_length=1)
    classes: tuple[BedClass, ...] = Field(default_factory=_default_classes, min_length=1)

    @model_validator(mode="after")
    def _shares_close(self) -> Bed:
        names = [c.name for c in self.classes]
        for name in names:
            if names.count(name) > 1:
                raise ValueError(f'classes: the name "{name}" is given twice')
        sums: dict[str, float] = {}
        for c in self.classes:
            sums[c.part] = sums.get(c.part, 0.0) + c.share
        for part, total in sums.items():
            if abs(total - 1.0) > 1e-9:  # shares are typed decimals; anything further off is a mistake
                raise ValueError(f'classes: the shares of part "{part}" sum to {total:g}, expected 1')
        self._check_packing()
        for i, layer in enumerate(self.layers):
            _check_names(f"layers[{i}].critical_stress_pa", layer.critical_stress_pa, tuple(names))
            if layer.thickness_m < self.minimum_thickness_m:
                raise ValueError(
                    f"layers[{i}].thickness_m = {layer.thickness_m:g} is less than minimum_thickness_m = {self.minimum_thickness_m:g}"
                )
        if self.layers[0].fill != "same":
            raise ValueError('layers: the first layer is the map, so its fill is "same"')
        return self

    def _check_packing(self) -> None:
        for c in self.classes:
            if c.packing.dry_density_kg_m3 is None:
                continue
            if self.packing != "class":
                raise ValueError(f'classes "{c.name}": packing.dry_density_kg_m3 acts with packing = "class" only')
            if c.packing.dry_density_kg_m3 >= c.grain.density_kg_m3:
                raise ValueError(
                    f'classes "{c.name}": packing.dry_density_kg_m3 = {c.packing.dry_density_kg_m3:g} leaves no pores '
                    f"between grains of {c.grain.density_kg_m3:g}"
                )
        for i, layer in enumerate(self.layers):
            if (layer.dry_density_kg_m3 is None) == (self.packing == "layer"):
                raise ValueError(
                    f'layers[{i}].dry_density_kg_m3: packing = "layer" needs it'
                    if layer.dry_density_kg_m3 is None
                    else f'layers[{i}].dry_density_kg_m3 acts with packing = "layer" only'
                )


SIDES = ("north", "east", "south", "west")


class Rim(Settings):
    """The padded coarse cells along the open boundary."""

    sides: Literal["open"] | tuple[Literal["north", "east", "south", "west"], ...] | Path = Field(
        "open",
        description='"open": found from the mask; compass sides such as ["south", "west"]; or a file of lines, whose cells '
        "are the edge, or of polygons, whose cells are all the rim's own",
    )
    width_cells: Annotated[int, Field(ge=1)] | None = Field(None, description="width in cells")
    width_m: Positive | None = Field(None, description="width in metres, measured through water")
    profile: Literal["cosine", "linear", "step"] = Field("cosine", description="how the rim fades into the estimate")
    classes: dict[str, Fraction] | None = Field(None, description="rim bed in classes, summing to 1")
    composition: dict[str, Fraction] | None = Field(None, description="rim bed in parts, summing to 1")
    parent: Path | None = Field(
        None,
        description="bed file of the larger model that this one is nested in: the rim takes its bed, class by class",
    )
    parent_names: Path | None = Field(None, description="names file that the parent was written through")

    @field_validator("sides", mode="before")
    @classmethod
    def _word_or_file(cls, given: Any) -> Any:
        words = [given] if isinstance(given, str) and "." not in given and given != "open" else given
        for word in words if isinstance(words, (list, tuple)) else ():
            if word not in SIDES or isinstance(given, str):
                raise ValueError(
                    f'"{word}": expected "open", a list of compass sides such as ["south", "west"], or a file such as '
                    '"edge.geojson"'
                )
        return given

    @model_validator(mode="after")
    def _complete(self) -> Rim:
        if (self.width_cells is None) == (self.width_m is None):
            raise ValueError("give either width_cells or width_m")
        if sum(given is not None for given in (self.classes, self.composition, self.parent)) != 1:
            raise ValueError("give either classes or composition or parent")
        if self.parent_names is not None and self.parent is None:
            raise ValueError("parent_names: is of the file in `parent`, which is missing")
        if self.parent is not None:
            return self
        total = sum((self.classes or self.composition or {}).values())
        if abs(total - 1.0) > 1e-9:  # typed decimals; anything further off is a mistake
            raise ValueError(f"the rim's fractions sum to {total:g}, expected 1")
        return self


class Outputs(Settings):
    """What is written."""

    geotiff: bool = Field(True, description="write a GeoTIFF for each part and statistic")
    geotiff_cell_size_m: Positive | None = Field(
        None, description="cell size of the resample of a curvilinear grid; its median cell side if absent"
    )
    names: Path | None = Field(None, description="the user's own variable and dimension names for bed.nc")
    into: Path | None = Field(
        None, description="the model's own initial file; a copy gets the bed, under the names of the names file"
    )
    into_record: Annotated[int, Field(ge=0)] | None = Field(
        None, description="record of that file to fill, from 0, where it has several times"
    )
    precision: Literal["float64", "float32"] = Field(
        "float64", description="how bed.nc stores numbers; class fractions sum to 1 exactly in float32 too"
    )
    text: bool = Field(False, description="write bed.csv as well: one row for each cell, in the grid's own order")

    @model_validator(mode="after")
    def _into_has_names(self) -> Outputs:
        if self.into is not None and self.names is None:
            raise ValueError("into: needs names as well, the file that says what your variables are called")
        if self.into_record is not None and self.into is None:
            raise ValueError("into_record: says a record of the file in `into`, which is missing")
        return self


NotNegative = Annotated[float, Field(ge=0.0)]


class Mobility(Settings):
    """One `[[mobility]]` block: waves and a current, to see which sediment they would move.

    A value is a number, the name of a variable in `file`, or a GeoTIFF. Variables may be series in time, on the cells or for
    all of them; what moves is then averaged over the times.
    """

    name: Annotated[str, Field(min_length=1)] = Field(
        description="name of the condition, such as a storm's return period"
    )
    file: Path | None = Field(None, description="NetCDF file on the target's cells that holds the variables named here")
    orbital_velocity_m_s: NotNegative | str | Path = Field(0.0, description="of the waves near the bed")
    kind: Literal["rms", "significant", "peak"] | None = Field(
        None,
        description="what that velocity is: root mean square of a sea, its significant value (twice that), or the amplitude "
        "of one wave; mistaking one for another changes the stress by a factor of up to 2.8",
    )
    period_s: Positive | str | Path | None = Field(None, description="wave period")
    current_m_s: NotNegative | str | Path = Field(0.0, description="depth-mean speed of the current")
    depth_m: Positive | str | Path | None = Field(
        None, description="depth that the current flows in; the target's own if absent"
    )
    angle_deg: Annotated[float, Field(ge=0.0, le=180.0)] = Field(
        0.0, description="between waves and current; 0 gives the largest stress"
    )
    hours: Positive | None = Field(
        None, description="how long it lasts; with it, the hours above each class's threshold are told"
    )
    fair_weather: bool = Field(False, description="an ordinary day: mud far beyond its strength would be gone at once")
    flush_ratio: Annotated[float, Field(ge=1.0)] | None = Field(
        None, description="stress over the mud's critical stress that counts as far beyond; 3 if absent"
    )

    @model_validator(mode="after")
    def _complete(self) -> Mobility:
        waves = self.orbital_velocity_m_s != 0.0
        if waves and self.kind is None:
            raise ValueError(
                f'"{self.name}": kind is missing; say whether the velocity is "rms", "significant" or "peak"'
            )
        if waves != (self.period_s is not None):
            raise ValueError(f'"{self.name}": give orbital_velocity_m_s and period_s together')
        if not waves and self.current_m_s == 0.0:
            raise ValueError(
                f'"{self.name}": has neither waves nor a current; give orbital_velocity_m_s or current_m_s'
            )
        if self.flush_ratio is not None and not self.fair_weather:
            raise ValueError(f'"{self.name}": flush_ratio acts with fair_weather = true only')
        for key in ("orbital_velocity_m_s", "period_s", "current_m_s", "depth_m"):
            value = getattr(self, key)
            if isinstance(value, str) and not value.lower().endswith((".tif", ".tiff")) and self.file is None:
                raise ValueError(f'"{self.name}": {key} = "{value}" names a variable, but file is missing')
        return self


class Inventory(Settings):
    """How the tonnes are counted out."""

    depth_bands_m: tuple[float, ...] = Field(
        (10.0, 20.0, 50.0, 100.0, 200.0), description="limits of the depth bands, from shallow to deep"
    )

    @model_validator(mode="after")
    def _ascending(self) -> Inventory:
        if list(self.depth_bands_m) != sorted(set(self.depth_bands_m)):
            raise ValueError(f"depth_bands_m: expected limits from shallow to deep, found {list(self.depth_bands_m)}")
        return self


class Recipe(Settings):
    """The whole recipe."""

    title: str = Field("Untitled bed", description="stands on the page and in the files")
    output: Path = Field(Path("out"), description="output folder, relative to the recipe")
    seed: Annotated[int, Field(ge=0, lt=2**32)] = Field(1, description="seed of everything that is drawn")
    samples: tuple[Samples, ...] = Field(min_length=1)
    intake: Intake = Field(default_factory=Intake)
    composition: Composition = Field(default_factory=Composition)
    target: TargetSettings
    method: Method = Field(default_factory=Method)
    validation: Validation = Field(default_factory=Validation)
    bed: Bed = Field(default_factory=Bed)
    rim: Rim | None = None
    mobility: tuple[Mobility, ...] = ()
    inventory: Inventory = Field(default_factory=Inventory)
    outputs: Outputs = Field(default_factory=Outputs)

    @model_validator(mode="after")
    def _names_agree(self) -> Recipe:
        parts, classes = self.composition.parts, tuple(c.name for c in self.bed.classes)
        for c in self.bed.classes:
            if c.part not in parts:
                raise ValueError(f'bed.classes "{c.name}": part "{c.part}" is not one of {list(parts)}')
        for part in parts:
            if part not in {c.part for c in self.bed.classes}:
                raise ValueError(f'bed.classes: no class takes part "{part}"; its mass would be lost')
        for i, layer in enumerate(self.bed.layers):
            if layer.fill != "same":
                _check_composition(f"bed.layers[{i}].fill", layer.fill, parts, classes)
        if self.bed.land_fill != "nearest":
            _check_composition("bed.land_fill", self.bed.land_fill, parts, classes)
        conditions = [m.name for m in self.mobility]
        for name in conditions:
            if conditions.count(name) > 1:
                raise ValueError(f'mobility: the name "{name}" is given twice')
        if self.rim is not None and self.rim.classes is not None:
            _check_names("rim.classes", self.rim.classes, classes)
        if self.rim is not None and self.rim.composition is not None:
            _check_names("rim.composition", self.rim.composition, parts)
        return self


def _check_names(where: str, given: dict[str, float], known: tuple[str, ...]) -> None:
    for name in given:
        if name not in known:
            raise ValueError(f'{where}: unknown name "{name}"; {_nearest(name, known)}')


def _check_composition(where: str, given: dict[str, float], parts: tuple[str, ...], classes: tuple[str, ...]) -> None:
    if not (set(given) <= set(parts) or set(given) <= set(classes)):
        _check_names(where, given, tuple(dict.fromkeys((*parts, *classes))))
        raise ValueError(f"{where}: mixes parts and classes; give {list(parts)} or {list(classes)}")
    total = sum(given.values())
    if abs(total - 1.0) > 1e-9:  # typed decimals; anything further off is a mistake
        raise ValueError(f"{where}: fractions sum to {total:g}, expected 1")


def _nearest(word: str, known: tuple[str, ...]) -> str:
    import difflib

    close = difflib.get_close_matches(word, known, n=1, cutoff=0.5)
    return f'did you mean "{close[0]}"?' if close else f"known: {', '.join(known)}"
