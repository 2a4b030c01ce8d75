"""The result in words and as plain data."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

from toprecon.errors import StudyError
from toprecon.events import BEAMS
from toprecon.statistics import Measured, plain_number
from toprecon.study.interpreting import helicity_summary
from toprecon.study.plan import BranchChoice

if TYPE_CHECKING:
    from toprecon.asymmetry import EstimatorOptions, EstimatorResult
    from toprecon.study.result import BeamsResult, StudyResult

CLASS_NAMES = {
    "correct": "correct",
    "b_swapped": "b jets swapped",
    "w_mixed": "W jets mixed",
    "unmatched": "unmatched",
    "leaking": "leaking",
    "no_truth": "no truth",
    "not_signal": "not signal",
}

STEP_NAMES = {
    "acceptance": "acceptance",
    "resolution": "resolution",
    "wrong_b": "wrong b",
    "wrong_w": "wrong W jets",
    "unmatched": "unmatched",
    "charge": "charge",
    "outside": "outside phase space",
    "background": "background",
}


def result_mapping(result: StudyResult) -> dict[str, Any]:
    """Return a result as plain data for JSON.

    Parameters
    ----------
    result : StudyResult
        A finished study.

    Returns
    -------
    dict
        Numbers, text, lists and dicts only; a missing number is ``None``.
    """
    plan = result.plan
    return {
        "study": plan.study.name,
        "channel": plan.study.channel.value,
        "plan_hash": plan.hash,
        "cautions": list(result.cautions),
        "beams": _beams_mapping(result.beams, plan.asymmetry),
        "by_helicity": {
            n: _beams_mapping(b, plan.asymmetry) for n, b in result.by_helicity.items()
        },
        "helicities": _helicities_mapping(result),
        "statuses": result.statuses,
        "undefined": result.undefined,
        "samples": [sample.to_mapping() for sample in result.samples],
        "input": result.report.to_mapping() if result.report else None,
        "inputs": result.inputs,
    }


def result_text(result: StudyResult) -> str:
    """Return a result as a table for a terminal.

    Parameters
    ----------
    result : StudyResult
        A finished study.

    Returns
    -------
    str
        Several lines of plain text, at most 90 characters wide.
    """
    plan = result.plan
    lines = [f"{plan.study.name} ({plan.study.channel}, {plan.study.branch})", ""]
    if len(result.by_helicity) != 1 or len(result.samples) > 1:
        title = "all samples, generator weights"
        if result.beams.is_expected:
            title = (
                f"beams {plan.beams.electron_polarisation:+g}, "
                f"{plan.beams.positron_polarisation:+g}; expected at "
                f"{plan.beams.luminosity:g} fb^-1"
            )
        lines += _beams_lines(title, result.beams, plan.asymmetry)
    for name, beams in result.by_helicity.items():
        title = f"beams {name} ({BEAMS[name]})"
        lines += _beams_lines(title, beams, plan.asymmetry)
    lines += _helicities_lines(result)
    for observable, count in result.undefined.items():
        if count:
            lines.append(f"{count} events fail the cut on an undefined {observable}")
    if result.report is not None and result.report.n_rejected:
        lines.append(f"input: {result.report}")
    lines.append("caution: " + ";\n         ".join(result.cautions))
    return "\n".join(lines)


def budget_text(result: StudyResult) -> str:
    """Return the distortion budgets of all beams side by side.

    Parameters
    ----------
    result : StudyResult
        A finished study.

    Returns
    -------
    str
        One row per cause, one column per setting of the beams: those of the plan, and
        each helicity. Every column adds up to its last row; errors are paired.
    """
    found = {"all samples": result.beams, **result.by_helicity}
    if result.beams.is_expected:
        p = result.plan.beams
        name = f"{p.electron_polarisation:+g}, {p.positron_polarisation:+g}"
        found = {name: result.beams, **result.by_helicity}
    elif len(result.by_helicity) == 1:
        found = dict(result.by_helicity)
    budgets = [beams.asymmetry.budget for beams in found.values()]
    rows = [("beams", list(found))]
    rows.append(("generated, all signal", [str(b.generated) for b in budgets]))
    rows += [
        (f"  {text}", [_signed(b[name].shift) for b in budgets])
        for name, text in STEP_NAMES.items()
        if any(b[name].shift.value or b[name].shift.error > 1e-9 for b in budgets)
    ]
    rows.append(("reconstructed, all", [str(b.reconstructed) for b in budgets]))
    rows.append(("difference", [_signed(b.total) for b in budgets]))
    return "\n".join(
        f"{name:<24}" + "".join(f"{cell:>22}" for cell in cells) for name, cells in rows
    )


def sentence_of(beams: BeamsResult) -> str:
    """Return the outcome for one setting of the beams in a sentence or two.

    Parameters
    ----------
    beams : BeamsResult
        Results.

    Returns
    -------
    str
        Events selected, A_FB of the selected events generated and reconstructed, and
        their difference.
    """
    a, flow = beams.asymmetry, beams.cut_flow
    kind = "expected events" if beams.is_expected else "events"
    return (
        f"{flow.sums[-1]:,.0f} of {flow.sums[0]:,.0f} {kind} selected "
        f"({100 * flow.efficiency[-1]:.1f} %). A_FB generated "
        f"{a.generated_selected}, reconstructed {a.reconstructed}, "
        f"shift of the signal {a.shift}; generated, all events {a.generated}. "
        f"{_right_words(beams)}."
    ).replace("+-", "±")


def _right_words(beams: BeamsResult) -> str:
    """Say what is right in which share of which events."""
    right = beams.asymmetry.fraction_right
    if beams.branch is BranchChoice.BOOSTED:
        return (
            f"All quarks of the hadronic tops inside their fat jets in {right} of the "
            "selected signal events"
        )
    if beams.branch is BranchChoice.PER_EVENT:
        return (
            "Jets paired correctly, or all quarks of the hadronic tops inside their "
            f"fat jets, in {right} of the signal events matched or with tagged fat jets"
        )
    return f"Correct pairing in {right} of the matched events"


def _helicities_mapping(result: StudyResult) -> dict[str, Any]:
    """Cross sections and asymmetries of both helicities, or why there are none."""
    try:
        return helicity_summary(result).to_mapping()
    except StudyError as error:
        return {"missing": str(error)}


def _helicities_lines(result: StudyResult) -> list[str]:
    """Cross sections, A_FB and A_LR that two runs of opposite polarisations measure."""
    if len(result.by_helicity) != 2 or not result.beams.is_expected:
        return []
    try:
        found = helicity_summary(result)
    except StudyError as error:
        return [*_wrapped(str(error)), ""]
    title = "expected from two runs of opposite polarisations, half the luminosity each"
    return [title, *(f"  {line}" for line in str(found).splitlines()), ""]


def _estimators_mapping(found: EstimatorResult) -> dict[str, Any]:
    """Numbers of both estimators."""
    out: dict[str, Any] = {
        "spectrum": found.spectrum,
        "largest_cosine": found.largest_cosine,
        "correlation": plain_number(found.correlation),
        "chi2": plain_number(found.angular_fit.chi2),
        "degrees": found.angular_fit.degrees,
    }
    for name in ("counting", "fit"):
        estimator = getattr(found, name)
        out[name] = {
            part: getattr(estimator, part).to_mapping()
            for part in ("in_range", "factor", "extrapolated")
        }
    return out


def _beams_mapping(beams: BeamsResult, options: EstimatorOptions) -> dict[str, Any]:
    """Numbers of one setting of the beams."""
    a = beams.asymmetry
    flow = beams.cut_flow
    matrix = beams.migration
    return {
        "expected": beams.is_expected,
        "cut_flow": [
            {
                "step": step,
                "count": int(n),
                "sum": float(s),
                "efficiency": plain_number(e),
            }
            for step, n, s, e in zip(
                flow.steps, flow.counts, flow.sums, flow.efficiency, strict=True
            )
        ],
        "afb": {
            name: getattr(a, name).to_mapping()
            for name in (
                "generated",
                "generated_selected",
                "closest",
                "chosen",
                "reconstructed_signal",
                "reconstructed",
                "shift",
                "acceptance_shift",
                "total_shift",
            )
        },
        "expected_error": plain_number(a.expected_error) if beams.is_expected else None,
        "polarisation_error": (
            plain_number(beams.polarisation.error("reconstructed"))
            if beams.polarisation
            else None
        ),
        "estimators": _estimators_mapping(a.estimators(options)),
        "efficiency": a.efficiency.to_mapping(),
        "fraction_right": a.fraction_right.to_mapping(),
        "background_share": plain_number(a.background_share),
        "flips": {
            name: getattr(a.flips, name).to_mapping()
            for name in (
                "forward_to_backward",
                "backward_to_forward",
                "slope",
                "offset",
                "flipped",
            )
        },
        "by_class": {
            name: {
                "count": item.count,
                "share": item.share.to_mapping(),
                "generated": item.generated.to_mapping(),
                "reconstructed": item.reconstructed.to_mapping(),
                "shift": item.shift.to_mapping(),
                "flipped": item.flipped.to_mapping(),
            }
            for name, item in a.by_class.items()
        },
        "budget": {s.name: s.shift.to_mapping() for s in a.budget.steps},
        "migration": {
            "true_edges": list(matrix.true_binning.edges),
            "reco_edges": list(matrix.reco_binning.edges),
            "counts": matrix.counts.tolist(),
            "generated": matrix.generated.tolist(),
            "missed": matrix.missed.tolist(),
            "from_outside": matrix.from_outside.tolist(),
            "background": matrix.background.tolist(),
        },
    }


def _beams_lines(
    title: str, beams: BeamsResult, options: EstimatorOptions
) -> list[str]:
    """Lines of one setting of the beams."""
    a = beams.asymmetry
    width = max(len(step) for step in beams.cut_flow.steps)
    lines = [title, "-" * len(title)]
    lines += [
        f"  {step:<{width}}  {total:>12,.0f}  {share:8.4f}"
        for step, total, share in zip(
            beams.cut_flow.steps,
            beams.cut_flow.sums,
            beams.cut_flow.efficiency,
            strict=True,
        )
    ]
    rows = [
        ("generated, all signal", a.generated, None),
        ("generated, selected", a.generated_selected, a.acceptance_shift),
        ("reconstructed, signal", a.reconstructed_signal, a.shift),
    ]
    if a.background_share:
        rows.append(("reconstructed, all", a.reconstructed, a.total_shift))
    lines += ["", f"  {'A_FB':<24}{'value':>20}{'shift':>22}"]
    references = ("", "to all", "to selected", "to all")
    for (name, value, shift), reference in zip(rows, references, strict=False):
        change = "" if shift is None else f"{_signed(shift)} {reference}"
        lines.append(f"  {name:<24}{value!s:>20}    {change}".rstrip())
    if beams.is_expected:
        lines.append(f"  expected error of data: {a.expected_error:.4f}")
    if beams.polarisation is not None:
        error = beams.polarisation.error("reconstructed")
        lines.append(f"  error from the polarisations: {error:.5f}")
    found = a.estimators(options)
    lines += _wrapped(
        f"|cos| < {found.largest_cosine:g}, extrapolated: counting "
        f"{found.counting.extrapolated}, fit of the angular terms "
        f"{found.fit.extrapolated}, correlation {found.correlation:.2f}"
    )
    f, right = a.flips, _right_words(beams)
    lines += [
        "",
        f"  flips: a = {f.forward_to_backward}, b = {f.backward_to_forward}",
        f"  slope 1-a-b = {f.slope}, offset b-a = {f.offset}",
        *_wrapped(right[0].lower() + right[1:]),
        "",
        f"  {'class':<18}{'share':>18}{'A_FB generated':>20}{'reconstructed':>20}",
    ]
    lines += [
        f"  {CLASS_NAMES[name]:<18}{c.share!s:>18}{c.generated!s:>20}"
        f"{c.reconstructed!s:>20}"
        for name, c in a.by_class.items()
    ]
    budget = ", ".join(
        f"{STEP_NAMES[s.name]} {_signed(s.shift)}"
        for s in a.budget.steps
        if s.shift.value
    )
    lines += ["", *_wrapped(f"shift of A_FB by cause: {budget}"), ""]
    return lines


def _signed(shift: Measured) -> str:
    """Return a shift with its sign."""
    text = str(shift)
    return text if text.startswith("-") else f"+{text}"


def _wrapped(text: str) -> list[str]:
    """Text in lines of a terminal, indented."""
    import textwrap

    return textwrap.wrap(text, width=88, initial_indent="  ", subsequent_indent="    ")
