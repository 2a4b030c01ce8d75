"""The hand-off folder: all that somebody who unfolds needs, complete or absent.

::

    migration.root      histograms with sums of squared weights
    migration.npz       the same arrays for numpy
    migration.json      the same in the open histogram serialisation (UHI)
    hepdata/            submission.yaml and one table per array
    plan.toml           every setting
    provenance.json     version, hashes, inputs, samples, factors, cautions
    result.json         the numbers of the study
    closure.json        half B corrected with the response of half A, three methods
    variations.json     shifts if the input is varied, where they were asked for
    README.txt          what is what, conventions, cautions
"""

from __future__ import annotations

import dataclasses
import json
import os
import shutil
import warnings
from pathlib import Path
from typing import Any

from toprecon.errors import InputError, NotClosingWarning, StudyError
from toprecon.migration import (
    Method,
    MigrationMatrix,
    UnfoldingOptions,
    read_npz,
    write_hepdata,
    write_histogram_json,
    write_npz,
    write_root,
)
from toprecon.study.plan import StudyPlan
from toprecon.study.report import result_mapping
from toprecon.study.result import BeamsResult, StudyResult, provenance_of
from toprecon.study.varying import VariationShifts

_MARKER = "provenance.json"


@dataclasses.dataclass(frozen=True)
class HandOff:
    """What a hand-off folder holds.

    Parameters
    ----------
    migration : MigrationMatrix
        For the beams of the plan, bit for bit as written.
    by_helicity : dict of MigrationMatrix
        For pure beams.
    plan : StudyPlan
        The plan.
    provenance : dict
        Version, hashes, inputs, samples, factors, cautions.
    """

    migration: MigrationMatrix
    by_helicity: dict[str, MigrationMatrix]
    plan: StudyPlan
    provenance: dict[str, Any]


def write_hand_off(
    result: StudyResult,
    folder: str | os.PathLike[str],
    *,
    replace: bool = False,
    variations: VariationShifts | None = None,
) -> Path:
    """Write a hand-off folder.

    Parameters
    ----------
    result : StudyResult
        A finished study.
    folder : path
        Folder to make.
    replace : bool
        Whether an existing hand-off folder may be replaced.
    variations : VariationShifts, optional
        How the results shift if the input is varied, to go with them.

    Returns
    -------
    Path
        The folder; it appears under its name only when complete.

    Raises
    ------
    StudyError
        If the folder exists and may not, or is not a hand-off folder.
    """
    target = Path(folder)
    check_target(target, replace=replace)
    target.parent.mkdir(parents=True, exist_ok=True)
    partial = target.with_name(f".{target.name}.{os.getpid()}.part")
    shutil.rmtree(partial, ignore_errors=True)
    partial.mkdir()
    try:
        _write_all(result, partial)
        if variations is not None:
            _write_json(partial / "variations.json", variations.to_mapping())
        if target.exists():
            old = target.with_name(f".{target.name}.{os.getpid()}.old")
            target.replace(old)
            partial.replace(target)
            shutil.rmtree(old)
        else:
            partial.replace(target)
    finally:
        shutil.rmtree(partial, ignore_errors=True)
    return target


def check_target(target: Path, *, replace: bool = False) -> None:
    """Refuse a folder that must not be written to.

    Parameters
    ----------
    target : Path
        Folder to make.
    replace : bool
        Whether an existing hand-off folder may be replaced.

    Raises
    ------
    StudyError
        If it exists and ``replace`` is off, or it is something else.
    """
    if not target.exists() or (target.is_dir() and not any(target.iterdir())):
        return
    if not (target.is_dir() and (target / _MARKER).is_file()):
        msg = (
            f"{target}: a new folder is required, but this exists and is no hand-off "
            "folder; choose another name"
        )
        raise StudyError(msg)
    if not replace:
        msg = (
            f"{target}: a new folder is required, but a hand-off is there already; "
            "choose another name or allow replacing it (replace=True, --replace)"
        )
        raise StudyError(msg)


def read_hand_off(folder: str | os.PathLike[str]) -> HandOff:
    """Read a hand-off folder.

    Parameters
    ----------
    folder : path
        Written by :func:`write_hand_off`.

    Returns
    -------
    HandOff
        The same matrices, bit for bit.

    Raises
    ------
    InputError
        If the folder is not a complete hand-off.
    """
    source = Path(folder)
    try:
        provenance = json.loads((source / _MARKER).read_text(encoding="utf-8"))
    except (OSError, ValueError) as error:
        msg = f"{source}: a hand-off folder is required, but {_MARKER} cannot be read"
        raise InputError(msg) from error
    names = provenance["by_helicity"]
    return HandOff(
        migration=read_npz(source / "migration.npz"),
        by_helicity={n: read_npz(source / f"migration_{n}.npz") for n in names},
        plan=StudyPlan.load(source / "plan.toml"),
        provenance=provenance,
    )


def _write_all(result: StudyResult, folder: Path) -> None:
    """Write every file into an empty folder."""
    matrices = {"": result.migration}
    matrices.update({f"_{n}": r.migration for n, r in result.by_helicity.items()})
    for suffix, matrix in matrices.items():
        write_root(matrix, folder / f"migration{suffix}.root")
        write_npz(matrix, folder / f"migration{suffix}.npz")
        write_histogram_json(matrix, folder / f"migration{suffix}.json")
    write_hepdata(result.migration, folder / "hepdata")
    result.plan.save(folder / "plan.toml")
    provenance = {**provenance_of(result), "by_helicity": list(result.by_helicity)}
    _write_json(folder / _MARKER, provenance)
    _write_json(folder / "result.json", result_mapping(result))
    _write_json(folder / "closure.json", _closures(result))
    (folder / "README.txt").write_text(_readme(result), encoding="utf-8")


def _closures(result: StudyResult) -> dict[str, Any]:
    """Closure of every setting of the beams with every method, or why there is none."""
    beams = {"plan": result.beams, **result.by_helicity}
    return {
        name: {method.value: _closure(item, method) for method in Method}
        for name, item in beams.items()
    }


def _closure(beams: BeamsResult, method: Method) -> dict[str, Any]:
    """Residuals of one closure; the file says how probable they are."""
    try:
        with warnings.catch_warnings():
            warnings.simplefilter("ignore", NotClosingWarning)
            found = beams.closure(UnfoldingOptions(method=method))
    except StudyError as error:
        return {"missing": str(error)}
    return {
        "true_edges": list(found.unfolded.binning.edges),
        "strength": found.unfolded.strength,
        "generated": found.generated.tolist(),
        "corrected": found.unfolded.values.tolist(),
        "residual": found.residual.tolist(),
        "residual_covariance": found.covariance.tolist(),
        "chi2": found.chi2,
        "degrees": found.degrees,
        "probability": found.probability,
        "afb_generated": found.asymmetry_generated.to_mapping(),
        "afb_corrected": found.asymmetry_corrected.to_mapping(),
        "afb_residual": found.asymmetry_residual.to_mapping(),
    }


def _write_json(path: Path, data: dict[str, Any]) -> None:
    """Write plain data as JSON; missing numbers are null."""
    path.write_text(
        json.dumps(data, indent=1, sort_keys=True, allow_nan=False) + "\n",
        encoding="utf-8",
    )


def _readme(result: StudyResult) -> str:
    """Say what the folder holds and how to read the numbers."""
    plan = result.plan
    unit = (
        f"expected events at {plan.beams.luminosity:g} fb^-1"
        if result.beams.is_expected
        else "sums of generator weights (no luminosity or cross section)"
    )
    return f"""Migration of the top production angle: {plan.study.name}

Variable   cos(theta) of the top to the electron beam (forward > 0), frame {plan.angle.frame}
Truth      generated top before gluon radiation
Channel    {plan.study.channel}
Beams      polarisation electron {plan.beams.electron_polarisation:g}, positron {plan.beams.positron_polarisation:g} (> 0 right-handed)
Numbers    {unit}

counts[true, reco]  signal inside the truth phase space, selected
missed[true]        the same, not selected
generated[true]     counts summed over reco, plus missed
from_outside[reco]  signal process outside the truth phase space, selected
background[reco]    other processes, selected
..._variances       sums of squared weights

migration.root / .npz / .json hold the same arrays; migration_LR and migration_RL are
for pure beams. hepdata/ is ready for a submission. plan.toml repeats the study.
closure.json: half B of the events (by identity) corrected with the response of half A;
residuals are corrected minus generated of the same half, with paired covariance.
result.json: all numbers of the study; "helicities" are cross sections, A_FB and A_LR of
both helicities from two runs of opposite polarisations, with their covariance.
variations.json (if asked for): shifts of the results, varied minus nominal, with paired
errors.

Cautions: {"; ".join(result.cautions)}.
"""
