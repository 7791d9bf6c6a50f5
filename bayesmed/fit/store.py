"""A fit as one NetCDF file: draws, the study's rows and formulas, belief and settings."""

import json
import os
import tempfile
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd
import xarray as xr

from bayesmed.core.errors import ArgumentError, FitError
from bayesmed.fit.grouped import GroupedResult, regrouped
from bayesmed.fit.result import FitResult, Settings
from bayesmed.fit.statistics import reduce_study
from bayesmed.priors.by_group import ByGroup
from bayesmed.priors.coefficient_set import Coefficients
from bayesmed.priors.named import coefficient_from_spec, from_spec, to_spec
from bayesmed.study.observe import observe
from bayesmed.study.printed_regressions import republished
from bayesmed.study.published import observe_published

LAYOUT = 1
"""Version of the file's layout; a file of a newer one is refused."""


WITHOUT_ROWS = ("posterior", "sample_stats")
"""Groups that hold nothing of single rows."""


def save(result: FitResult, path: str | Path, *, rows: bool = True) -> Path:
    """Write a fit to a NetCDF file, whole or not at all; see ``Fit.save``.

    The rows used by the study (only its columns) are stored in the file, since conclusions at other moderator
    values need them; of a study known by published figures, the figures. With ``rows=False`` draws, sampler statistics
    and settings are stored and no row: such a file cannot be loaded as a fit, and xarray opens it.
    """
    target = Path(path)
    if not target.parent.is_dir():
        raise ArgumentError(f"save: folder {str(target.parent)!r} does not exist")
    observed = result.observed
    if observed.batches is not None:
        raise FitError("save: the rows of this study come in batches and are not stored; keep the draws of fit.tree")
    tree = result.tree.copy()
    kinds: list[dict[str, Any]] = []
    if not rows:
        tree = xr.DataTree.from_dict({name: tree[name].to_dataset() for name in WITHOUT_ROWS if name in tree})
        tree.attrs.update(result.tree.attrs)
    elif observed.published is None:
        encoded, kinds = _encoded(observed.frame)
        tree["rows"] = xr.DataTree(encoded)
    tree.attrs["bayesmed_layout"] = LAYOUT
    tree.attrs["study"] = json.dumps(
        {
            "exposure": observed.exposure,
            "contrast": list(observed.contrast),
            "mediator": observed.mediator_formula,
            "outcome": observed.outcome_formula,
            "moderators": list(observed.default_moderators),
            "columns": kinds,
            "published": None if observed.published is None else observed.published.source,
        }
    )
    tree.attrs["joint"] = int(result.joint)
    if isinstance(result, GroupedResult):
        tree.attrs["groups"] = json.dumps({"moderator": result.moderator, "levels": list(result.parts)})
    tree.attrs["belief"] = json.dumps(_belief_spec(result.belief))
    tree.attrs["coefficients"] = json.dumps(_coefficients_spec(result.coefficients))
    tree = tree.map_over_datasets(_plain_attributes)
    handle, temporary = tempfile.mkstemp(dir=target.parent, prefix=target.name, suffix=".part")
    os.close(handle)
    try:
        tree.to_netcdf(temporary, engine="h5netcdf")
        os.replace(temporary, target)
    except BaseException:
        Path(temporary).unlink(missing_ok=True)
        raise
    return target


def load(path: str | Path) -> FitResult:
    """Read a fit that :func:`save` wrote; see ``bayesmed.load``."""
    if not Path(path).is_file():
        raise ArgumentError(f"load: there is no file {str(path)!r}")
    try:
        with xr.open_datatree(path, engine="h5netcdf") as opened:
            tree = opened.load()
    except (OSError, ValueError) as error:
        raise FitError(f"load: {str(path)!r} is not a file that fit.save wrote") from error
    layout = int(tree.attrs.get("bayesmed_layout", 0))
    if not 1 <= layout <= LAYOUT:
        raise FitError(f"load: {str(path)!r} has layout {layout}, this version of bayesmed reads 1 to {LAYOUT}")
    study = json.loads(tree.attrs["study"])
    roles = {name: study[name] for name in ("exposure", "contrast", "mediator", "outcome", "moderators")}
    if (source := study.get("published")) is not None:
        observed = observe_published(republished(source), **roles)
    elif "rows" not in tree:
        raise FitError(
            f"load: {str(path)!r} was saved without the rows, which conclusions need; open its draws with "
            "xarray.open_datatree, or save the fit with rows=True"
        )
    else:
        observed = observe(_decoded(tree["rows"].to_dataset(), study["columns"]), **roles)
        del tree["rows"]
    attributes = tree.attrs
    draws, tune, chains, seed = (int(attributes[k]) for k in ("draws", "tune", "chains", "random_seed"))
    settings = Settings(attributes["method"], draws, tune, chains, seed, bool(attributes["learn"]))
    belief = _belief(json.loads(attributes["belief"]))
    coefficients = _coefficients(json.loads(attributes["coefficients"]))
    joint = bool(attributes["joint"])
    if "groups" in attributes:
        groups = json.loads(attributes["groups"])
        posterior = tree["posterior"].to_dataset()
        result = regrouped(
            observed, reduce_study(observed), settings, groups["moderator"], groups["levels"], posterior, belief
        )
        result.tree.attrs.update(attributes)
        return result
    loaded = FitResult(observed, reduce_study(observed), tree, belief, joint, coefficients, settings)
    if belief is None or joint or settings.method == "adopted":
        return loaded
    # The numbers that stand for rho come of the seed, so that they are the same to the last bit.
    return loaded.replaced(belief=None).with_belief(belief)


def _encoded(frame: pd.DataFrame) -> tuple[xr.Dataset, list[dict[str, Any]]]:
    """Return columns as numbers, with what is needed to read them back in order."""
    variables, kinds = {}, []
    for k, name in enumerate(frame.columns):
        column = frame[name]
        kind: dict[str, Any] = {"name": name, "kind": "number"}
        values = column.to_numpy()
        if isinstance(column.dtype, pd.CategoricalDtype):
            kind = {
                "name": name,
                "kind": "category",
                "levels": column.cat.categories.tolist(),
                "ordered": bool(column.cat.ordered),
            }
            values = column.cat.codes.to_numpy()
        elif values.dtype == bool:
            kind["kind"] = "boolean"
            values = values.astype("int8")
        variables[f"column_{k}"] = ("row", values)
        kinds.append(kind)
    return xr.Dataset(variables), kinds


def _decoded(rows: xr.Dataset, kinds: list[dict[str, Any]]) -> pd.DataFrame:
    columns: dict[str, Any] = {}
    for k, kind in enumerate(kinds):
        values = rows[f"column_{k}"].to_numpy()
        if kind["kind"] == "category":
            columns[kind["name"]] = pd.Categorical.from_codes(
                values.tolist(), categories=kind["levels"], ordered=kind["ordered"]
            )
        else:
            columns[kind["name"]] = values.astype(bool) if kind["kind"] == "boolean" else values
    return pd.DataFrame(columns)


def _belief_spec(belief: Any) -> Any:
    if not isinstance(belief, ByGroup):
        return None if belief is None else to_spec(belief)
    groups = [[level, to_spec(prior)] for level, prior in belief.items]
    return {"by_group": groups, "correlation": belief.correlation, "moderator": belief.moderator}


def _belief(spec: Any) -> Any:
    if not isinstance(spec, dict) or "by_group" not in spec:
        return None if spec is None else from_spec(spec, place="belief")
    priors = {level: from_spec(prior, place=f"belief.{level}") for level, prior in spec["by_group"]}
    return ByGroup(priors, correlation=spec["correlation"], moderator=spec["moderator"])


def _coefficients_spec(coefficients: Coefficients) -> dict[str, Any]:
    return {
        "mediator": {k: to_spec(v) for k, v in coefficients.mediator.items()},
        "outcome": {k: to_spec(v) for k, v in coefficients.outcome.items()},
        "sigma_mediator": coefficients.sigma_mediator and to_spec(coefficients.sigma_mediator),
        "sigma_outcome": coefficients.sigma_outcome and to_spec(coefficients.sigma_outcome),
        "scale": coefficients.scale,
    }


def _coefficients(spec: dict[str, Any]) -> Coefficients:
    def one(name: str) -> Any:
        return spec[name] and coefficient_from_spec(spec[name], place=f"coefficients.{name}")

    def many(name: str) -> dict[str, Any]:
        place = f"coefficients.{name}"
        return {k: coefficient_from_spec(v, place=f"{place}.{k}") for k, v in spec[name].items()}

    return Coefficients(many("mediator"), many("outcome"), one("sigma_mediator"), one("sigma_outcome"), spec["scale"])


def _plain_attributes(dataset: xr.Dataset) -> xr.Dataset:
    """Return the dataset with attributes that NetCDF can hold: others become JSON text."""

    def plain(attributes: dict[Any, Any]) -> dict[Any, Any]:
        allowed = (str, int, float, np.ndarray, np.number)
        return {
            k: v if isinstance(v, allowed) and not isinstance(v, bool) else json.dumps(v, default=str)
            for k, v in attributes.items()
        }

    copy = dataset.copy()
    copy.attrs = plain(dataset.attrs)
    for name in copy.variables:
        copy[name].attrs = plain(dataset[name].attrs)
    return copy
