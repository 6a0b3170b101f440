"""The methods paragraph: what was done, with the numbers of this run and the sources, ready to paste."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from texture.report.words import sentence

if TYPE_CHECKING:
    from texture.result import Result

__all__ = ["SOURCES", "methods_paragraph"]

MOST_DENSE = 500  # stations up to which the likelihood is dense, see `texture.structure.fit`

SOURCES = {
    "Aitchison 1986": "Aitchison, J. (1986). The Statistical Analysis of Compositional Data. Chapman and Hall, London.",
    "Cressie and Hawkins 1980": "Cressie, N. and Hawkins, D. M. (1980). Robust estimation of the variogram: I. Mathematical Geology 12, 115-125.",
    "Egozcue et al. 2003": "Egozcue, J. J., Pawlowsky-Glahn, V., Mateu-Figueras, G. and Barceló-Vidal, C. (2003). Isometric logratio transformations for compositional data analysis. Mathematical Geology 35, 279-300.",
    "Folk 1954": "Folk, R. L. (1954). The distinction between grain size and mineral composition in sedimentary-rock nomenclature. Journal of Geology 62, 344-359.",
    "Løland and Høst 2003": "Løland, A. and Høst, G. (2003). Spatial covariance modelling in a complex coastal domain by multidimensional scaling. Environmetrics 14, 307-321.",
    "Linnenbrink et al. 2024": "Linnenbrink, J., Milà, C., Ludwig, M. and Meyer, H. (2024). kNNDM CV: k-fold nearest-neighbour distance matching cross-validation for map accuracy estimation. Geoscientific Model Development 17, 5897-5912.",
    "Martín-Fernández et al. 2003": "Martín-Fernández, J. A., Barceló-Vidal, C. and Pawlowsky-Glahn, V. (2003). Dealing with zeros and missing values in compositional data sets using nonparametric imputation. Mathematical Geology 35, 253-278.",
    "Meyer and Pebesma 2021": "Meyer, H. and Pebesma, E. (2021). Predicting into unknown space? Estimating the area of applicability of spatial prediction models. Methods in Ecology and Evolution 12, 1620-1633.",
    "Patterson and Thompson 1971": "Patterson, H. D. and Thompson, R. (1971). Recovery of inter-block information when block sizes are unequal. Biometrika 58, 545-554.",
    "Pawlowsky-Glahn and Olea 2004": "Pawlowsky-Glahn, V. and Olea, R. A. (2004). Geostatistical Analysis of Compositional Data. Oxford University Press.",
    "Soulsby 1997": "Soulsby, R. (1997). Dynamics of Marine Sands. Thomas Telford, London.",
    "Soulsby and Whitehouse 1997": "Soulsby, R. L. and Whitehouse, R. J. S. (1997). Threshold of sediment motion in coastal environments. Pacific Coasts and Ports '97, Christchurch, 149-154.",
    "Vecchia 1988": "Vecchia, A. V. (1988). Estimation and model identification for continuous spatial processes. Journal of the Royal Statistical Society B 50, 297-312.",
    "Vigsnes et al. 2017": "Vigsnes, M., Kolbjørnsen, O., Hauge, V. L., Dahle, P. and Abrahamsen, P. (2017). Fast and accurate approximation to kriging using common data neighborhoods. Mathematical Geosciences 49, 619-634.",
    "Wu and Wang 2006": "Wu, W. and Wang, S. S. Y. (2006). Formulas for sediment porosity and settling velocity. Journal of Hydraulic Engineering 132, 858-862.",
}
"""Short name, as the paragraph cites it → the full reference."""
KRIGING = {
    "kriging_in_water": "ordinary kriging with distance along the shortest way around land (Løland and Høst 2003)",
    "kriging_with_covariates": "ordinary kriging with covariates as further coordinates, each with a range of its own,",
    "kriging_with_drift": "kriging with a mean that follows covariates linearly",
}


def methods_paragraph(result: Result) -> tuple[str, list[str]]:
    """Write the paragraph, and the references that it cites in alphabetical order."""
    import texture

    text = " ".join(
        (_data(result), _coordinates(result), _structure(result), _map(result), _error(result), _bed(result))
    )
    text += f" All steps were run with Seabed Texture {texture.__version__}."
    return text, sorted(full for short, full in SOURCES.items() if short in text)


def _data(result: Result) -> str:
    found, counts = result.found, result.found.stations.counts
    surveys = found.stations.samples["survey"].nunique()
    return (
        f"Of {counts['rows_read']:,} rows in {len(found.recipe.samples)} files, {counts['rows_used']:,} were used, "
        f"{counts['rows_merged']:,} merged with others of the same place, {counts['rows_evidence']:,} kept as evidence of hard "
        f"ground, and {counts['rows_set_aside']:,} set aside with a reason, which gave {counts['stations']:,} stations of "
        f"{surveys} survey{'s' * (surveys != 1)}. Mud (finer than {found.recipe.intake.mud_below_mm:g} mm), sand and gravel (coarser than "
        f"{found.recipe.intake.gravel_above_mm:g} mm) are fractions of dry mass."
    )


def _coordinates(result: Result) -> str:
    found = result.found
    kind, names = found.recipe.composition.logratio, ", ".join(found.mapper.column_names)
    logs = any(name.startswith("ln") for name in found.mapper.column_names)
    source = "Egozcue et al. 2003" if kind == "ilr" else "Aitchison 1986"
    what = (
        f"mapped in the log-ratio coordinates {names} ({source})" if logs else f"mapped as {names}, without logarithms"
    )
    zeros = found.mapper.treatment.label
    cite = " (Martín-Fernández et al. 2003)" if zeros.startswith("replaced") else ""
    tried = len(found.validation.tried)
    chosen = f", the best balanced of {tried} treatments by held-out error" if tried > 1 else ""
    return f"They were {what}; parts below detection were treated as follows: {zeros}{cite}{chosen}."


def _structure(result: Result) -> str:
    mapper = result.found.mapper
    if not mapper.solves:
        return ""
    fits = []
    for name, c in zip(mapper.column_names, mapper.structure, strict=True):
        if not c.structures:
            fits.append(f"{name}: no spatial structure")
            continue
        model = " and ".join(s.model + (f" {s.smoothness:g}" if s.smoothness else "") for s in c.structures)
        sill = sum(s.sill for s in c.structures)
        fits.append(
            f"{name}: {model}, range {c.range_m / 1000:.1f} km, sill {sill:.2f}, small-scale variance {c.small_scale:.2f}"
        )
    if result.found.recipe.method.fit == "variogram":
        how = "weighted least squares on a robust variogram (Cressie and Hawkins 1980)"
    else:
        how = "restricted maximum likelihood (Patterson and Thompson 1971"
        how += "; Vecchia 1988)" if result.found.observations.count > MOST_DENSE else ")"
    return (
        f"Covariances were fitted by {how}, with an offset shared by samples of one survey as a random effect; ranges are "
        f"distances at which the correlation has fallen to 0.05 ({'; '.join(fits)})."
    )


def _map(result: Result) -> str:
    found, method = result.found, result.found.recipe.method
    cells = f"{int(found.target.active.sum()):,} water cells about {found.cell_side_m:,.0f} m wide"
    inside = result.points_per_side**2
    mean = f"the mean over {inside} points inside each" if inside > 1 else "taken at the centre of each"
    shared = (
        "in neighbourhoods shared by a small tile (Vigsnes et al. 2017)"
        if method.neighbourhood == "tile"
        else f"from the nearest {method.neighbours} stations"
    )
    back = (
        "expected fractions, which integrate the predicted distribution instead of transforming its mean back "
        "(Pawlowsky-Glahn and Olea 2004)"
        if method.estimate == "mean" and found.mapper.integrates
        else "back-transformed coordinates, near the median of each part"
    )
    if not found.mapper.solves:
        name = found.validation.method.replace("_", " ")
        return f"Values at {cells} come from {name}, as {back}, {mean}; texture classes are the most probable of Folk 1954."
    kriging = KRIGING.get(found.validation.method, "ordinary kriging")
    return (
        f"The map at {cells} is by {kriging} {shared}, as {back}, {mean}; texture classes are the most probable of "
        "Folk 1954."
    )


def _error(result: Result) -> str:
    found = result.found
    folds, chosen = found.validation.folds, found.validation.chosen
    design = {
        "matched": "matched to the distances from map cells to samples (Linnenbrink et al. 2024)",
        "random": "drawn at random",
        "blocks": "of spatial blocks",
        "each": "of one station each",
    }[folds.kind]
    scores = ", ".join(
        f"{part} {chosen.score(part, 'rmse'):.3f} (R² {chosen.score(part, 'r_squared'):.2f})"
        for part in found.recipe.composition.parts
    )
    others = "; ".join(
        f"{m.method.replace('_', ' ')} "
        + ", ".join(f"{m.score(part, 'rmse'):.3f}" for part in found.recipe.composition.parts)
        for m in found.validation.methods[1:]
    )
    cover = [chosen.score(part, "coverage_90") for part in found.recipe.composition.parts]
    text = (
        f"Cross-validation in {folds.count} folds {design}, with everything that learns fitted anew in each, gave RMSE "
        f"{scores}" + (f", against {others} in the same order" if others else "")
    )
    if np.isfinite(cover).all():
        text += "; 90 % intervals held " + ", ".join(f"{100 * c:.0f} %" for c in cover) + " of the held-out samples"
    return (
        f"{text}. {sentence(f'{100 * result.beyond_share:.1f} % of the water area')} lies beyond the tested reach of "
        f"{found.reach_m / 1000:.1f} km (Meyer and Pebesma 2021)."
    )


def _bed(result: Result) -> str:
    settings, account = result.found.recipe.bed, result.bed.account
    thickness = ", ".join(f"{layer.thickness_m:g} m" for layer in settings.layers)
    density = {
        "mixture": "dry density follows Wu and Wang 2006",
        "class": "dry density adds up the volumes of the classes",
        "layer": "dry density is given for each layer",
    }[settings.packing]
    computed = any("computed" in s for s in result.bed.classes.settling_source)
    grains = (
        "; settling and threshold of single grains above 63 µm follow Soulsby 1997 and Soulsby and Whitehouse 1997"
        if computed
        else ""
    )
    rim = (
        f" A rim of {account.rim_cells:,} cells along the open boundary is numerical, not observed."
        if account.rim_cells
        else ""
    )
    return (
        f"The bed has {len(settings.classes)} sediment classes in layers of {thickness} from the top; {density}{grains}. "
        f"{100 * account.share_below_samples:.0f} % of its mass lies below any sample.{rim}"
    )
