"""Files out: CF NetCDF, GeoTIFF, tables, provenance, all put in place together or not at all."""

from texture.output.bed_nc import bed_dataset
from texture.output.bed_variables import BED_VARIABLES
from texture.output.cf import on_cells, write_netcdf
from texture.output.class_colours import class_colours
from texture.output.compliance import check_cf
from texture.output.folder import RESULTS, ResultFolder
from texture.output.geotiff import pixel_grid, write_geotiff, write_geotiffs
from texture.output.into import check_into, stores_single, write_into
from texture.output.members_nc import NOT_A_BED, summary_dataset, write_members, write_stack
from texture.output.names import Names, read_names
from texture.output.open_bed import bed_arrays, open_bed
from texture.output.outline import bed_outline, check_outputs
from texture.output.parent import parent_bed
from texture.output.provenance import provenance, write_json
from texture.output.quantities import quantity_geotiffs, with_quantities
from texture.output.renaming import apply_names
from texture.output.tables import write_csv
from texture.output.text_table import cell_table, write_cells
from texture.output.texture_nc import texture_dataset

__all__ = [
    "BED_VARIABLES",
    "NOT_A_BED",
    "RESULTS",
    "Names",
    "ResultFolder",
    "apply_names",
    "bed_arrays",
    "bed_dataset",
    "bed_outline",
    "cell_table",
    "check_cf",
    "check_into",
    "check_outputs",
    "class_colours",
    "on_cells",
    "open_bed",
    "parent_bed",
    "pixel_grid",
    "provenance",
    "quantity_geotiffs",
    "read_names",
    "stores_single",
    "summary_dataset",
    "texture_dataset",
    "with_quantities",
    "write_cells",
    "write_csv",
    "write_geotiff",
    "write_geotiffs",
    "write_into",
    "write_json",
    "write_members",
    "write_netcdf",
    "write_stack",
]
