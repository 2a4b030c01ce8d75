"""Layouts of unknown files, guessed from the names of their columns.

Good for the usual names (``nJet``, ``Jet_pt[nJet]``, ``Muon_Px``, ``met_phi``); always
said in the report, and only a start for a layout of one's own.
"""

from __future__ import annotations

import dataclasses
import re
from typing import Any

import numpy as np

from toprecon.errors import InputError, OptionError
from toprecon.io.columns import Columns
from toprecon.io.layout import DIRECTIONS, FileLayout

_COMPONENTS = {
    "e": "E",
    "en": "E",
    "energy": "E",
    "m": "m",
    "mass": "m",
    "px": "px",
    "py": "py",
    "pz": "pz",
    "x": "px",
    "y": "py",
    "z": "pz",
    "pt": "pt",
    "eta": "eta",
    "phi": "phi",
    "p": "p",
    "theta": "theta",
}
_EXTRA_NAMES = {
    "btag": r"(b_?tag|b_?disc|b_?score|b_?prob|deep_?b|csv)\w*",
    "charge": r"(charge|q)",
    "pdg": r"(pdg|pdg_?id|pid)",
    "isolation": r"(iso|isolation|rel_?iso)\w*",
    "track_charge": r"(q_?trk|track_?charge|jet_?charge)",
    "vertex_charge": r"(q_?vtx|vertex_?charge)",
    "jet_index": r"(jet|jet_?(index|idx))",
}
_ROLES = {
    "jets": r"^(jets?|jt|ak\d*jets?|durham_?jets?)$",
    "electrons": r"^(electrons?|ele?s?)$",
    "muons": r"^(muons?|mus?)$",
    "leptons": r"^(leptons?|leps?|il|iso_?leptons?)$",
    "photons": r"^(photons?|gammas?|phs?)$",
    "particles": r"^(pf|pfos?|particles?|constituents?|pfcands?)$",
    "missing": r"^(met|missing|pmiss|missing_?et|miss)$",
}
_FIELDS = {
    "jets": ("btag", "track_charge", "vertex_charge"),
    "leptons": ("charge", "pdg", "isolation"),
    "particles": ("charge", "jet_index"),
    "photons": (),
    "missing": (),
}
_TRUTH = re.compile(r"^(gen|truth|mc|true)_?", re.IGNORECASE)
_TRUTH_NAMES = {
    "top": r"t|top",
    "antitop": r"tb|tbar|antitop|atop",
    "w_plus": r"wp|w_?plus",
    "w_minus": r"wm|w_?minus",
    "b": r"b",
    "bbar": r"bb|bbar|antib",
    "w_plus_up": r"(wp|w_?plus)_?up",
    "w_plus_down": r"(wp|w_?plus)_?(dn|down)",
    "w_minus_up": r"(wm|w_?minus)_?up",
    "w_minus_down": r"(wm|w_?minus)_?(dn|down)",
}
_EVENT = {
    "number": r"(evt|event)_?(no|num|number|id)?|eventnumber",
    "run": r"run_?(no|num|number)?",
    "weight": r"(evt|event|gen|mc)?_?w(eight|gt)?",
    "sqrt_s": r"sqrt_?s|ecm(_?nom)?|roots",
}
_LOOK = 200
"""Events looked at to tell MeV from GeV."""
_MEV = 5000.0
"""A median jet energy above this is in MeV: no collider gives jets of 5 TeV."""


@dataclasses.dataclass(frozen=True)
class Guess:
    """A proposed layout, and what every column seems to be.

    Parameters
    ----------
    layout : FileLayout, or None
        None if there are no jets among the columns.
    mapped : dict
        Quantity -> column.
    """

    layout: FileLayout | None
    mapped: dict[str, str]


def guess_layout(columns: Columns) -> Guess:
    """Propose a layout from the names of columns.

    Parameters
    ----------
    columns : Columns
        Open file.

    Returns
    -------
    Guess
        Layout and mapping.
    """
    groups = _groups(list(columns.types))
    settings: dict[str, Any] = {}
    mapped: dict[str, str] = {}
    for prefix, members in groups.items():
        ragged = any(_is_list(columns.types[name]) for name in members.values())
        role = next(
            (
                r
                for r, pattern in _ROLES.items()
                if re.match(pattern, prefix, re.IGNORECASE)
            ),
            "",
        )
        momentum = _momentum(members)
        if not role or not momentum or ragged == (role == "missing"):
            continue
        section = "leptons" if role in {"electrons", "muons"} else role
        extra: dict[str, Any] = {}
        for name in _FIELDS[section]:
            pattern = _EXTRA_NAMES[name]
            found = next(
                (k for k in members if re.fullmatch(pattern, k, re.IGNORECASE)), None
            )
            if found:
                extra[name] = members[found]
        mapped |= {
            f"{role}.{key}": column for key, column in {**momentum, **extra}.items()
        }
        if role in {"electrons", "muons"} and "pdg" not in extra:
            extra["pdg"] = 11.0 if role == "electrons" else 13.0
        count = _counter(prefix, columns.types)
        if count:
            extra["count"] = count
        table = {**momentum, **extra}
        if section == "missing":
            settings[section] = momentum
        else:
            settings.setdefault(section, []).append(table)
    truth = _truth(groups)
    for name, momentum in truth.items():
        mapped |= {f"truth.{name}.{key}": column for key, column in momentum.items()}
    if truth:
        settings["truth"] = truth
    event = _event(columns.types)
    mapped |= {f"event.{name}": column for name, column in event.items()}
    settings["event"] = event
    if "jets" not in settings:
        return Guess(None, mapped)
    try:
        layout = FileLayout(
            name="guessed", tree=getattr(columns, "tree", ""), **settings
        )
    except OptionError:
        return Guess(None, mapped)
    return Guess(_with_unit(layout, columns), mapped)


def _groups(names: list[str]) -> dict[str, dict[str, str]]:
    """Columns by the part of their names before the last separator."""
    groups: dict[str, dict[str, str]] = {}
    for name in names:
        match = re.fullmatch(r"(.+?)[_.]((?:[A-Za-z0-9]+)(?:_[A-Za-z]+)?)", name)
        cut = name.rfind("_") if "_" in name else name.rfind(".")
        for prefix, rest in {
            (name[:cut], name[cut + 1 :]) if cut > 0 else ("", ""),
            (match[1], match[2]) if match else ("", ""),
        }:
            if prefix and rest:
                groups.setdefault(prefix, {}).setdefault(rest, name)
    return groups


def _momentum(members: dict[str, str]) -> dict[str, str]:
    """Components of a momentum among the columns of a group; empty if incomplete."""
    found: dict[str, str] = {}
    for key, name in members.items():
        component = _COMPONENTS.get(key.lower())
        if component:
            found.setdefault(component, name)
    for direction in DIRECTIONS:
        if all(c in found for c in direction):
            rest = "E" if "E" in found else "m" if "m" in found else ""
            if rest:
                return {c: found[c] for c in (rest, *direction)}
    return {}


def _truth(groups: dict[str, dict[str, str]]) -> dict[str, dict[str, str]]:
    """Return generated momenta by name."""
    out = {}
    for prefix, members in groups.items():
        if not _TRUTH.match(prefix):
            continue
        rest = _TRUTH.sub("", prefix)
        for name, pattern in _TRUTH_NAMES.items():
            if re.fullmatch(pattern, rest, re.IGNORECASE):
                momentum = _momentum(members)
                pdg = {k: v for k, v in members.items() if k.lower() == "pdg"}
                if momentum:
                    out[name] = momentum | (
                        {"pdg": next(iter(pdg.values()))} if pdg else {}
                    )
    return out


def _event(types: dict[str, str]) -> dict[str, str]:
    """Columns of whole events."""
    out: dict[str, str] = {}
    for name, pattern in _EVENT.items():
        for column, kind in types.items():
            whole = "int" in kind
            if _is_list(kind) or not re.fullmatch(pattern, column, re.IGNORECASE):
                continue
            if whole or name not in {"number", "run"}:
                out.setdefault(name, column)
    return out


def _counter(prefix: str, types: dict[str, str]) -> str:
    """Column with the number of objects of a group."""
    wanted = {f"n{prefix}".lower(), f"n_{prefix}".lower(), f"{prefix}_n".lower()}
    return next((name for name in types if name.lower() in wanted), "")


def _is_list(kind: str) -> bool:
    """Whether a type as the library prints it is a list per event."""
    return "[" in kind or "list" in kind or "vector" in kind


def _with_unit(layout: FileLayout, columns: Columns) -> FileLayout:
    """Return the layout with the unit of energy that the size of the numbers suggests."""
    jets = layout.jets[0]
    source = next(s for s in (jets.E, jets.pt, jets.p, jets.px) if s is not None)
    try:
        stop = min(_LOOK, columns.n_entries)
        values = columns.read([source.branch], 0, stop)[source.branch].values
    except InputError:
        return layout
    finite = np.abs(values[np.isfinite(values)])
    if len(finite) and float(np.median(finite)) > _MEV:
        return layout.replace(energy_unit="MeV")
    return layout
