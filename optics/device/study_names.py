"""What a study table names beside its paths: links between them, and outcomes.

A case at fault tells wrong ones with its other faults. Of a sound case the study itself tells them
when it is asked for, with what only a sound device can say: other commands need none of it.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from typing import Any, NamedTuple

from optics.device.errors import Fault
from optics.device.outcome_names import OutcomeNames

Named = tuple[str, str]  # key in the case file, name that stands there


class Study(NamedTuple):
    """A kind of study, and how it speaks of what it varies."""

    name: str  # of its table
    table: str  # where the paths stand in it
    participle: str  # what is done to them
    other: str  # what an outcome has to be


#: By name.
STUDIES = {
    one.name: one
    for one in (
        Study("sweep", "axes", "swept", "no axis"),
        Study("optimize", "variables", "varied", "no variable"),
        Study("tolerance", "spread", "varied", "not varied"),
    )
}


def name_faults(
    where: str,
    study: Study,
    table: Mapping[str, Any],
    names: OutcomeNames,
    *,
    every_path: bool = True,
    every_name: bool = True,
) -> list[Fault]:
    """Links that lead nowhere, and outcomes that are unknown, ambiguous, given twice or varied.

    Parameters
    ----------
    where : str
        How messages call the file.
    study : Study
    table : mapping
        The study as plain types; of one at fault what can be used.
    names : OutcomeNames
        Of the device.
    every_path, every_name : bool
        Whether the paths and `names` are all there are. Otherwise one that is missing may be what
        a link leads to, or any outcome of an emitter or a unit.
    """
    faults = [
        Fault(where, f'{study.name}.linked."{path}"', found, expected)
        for path, found, expected in _link_faults(study, table, every_path)
    ]
    asked: list[Named] = []
    for key, name in asked_outcomes(study, table):
        if name in table.get(study.table, {}):
            said = f"{name}, which is {study.participle}"
            faults.append(Fault(where, key, said, f"an outcome that is {study.other}"))
        elif every_name or names.surely_wrong(name):
            asked.append((key, name))
    return faults + names.find_all(asked, where)[1]


def followers(study: Study, table: Mapping[str, Any]) -> tuple[tuple[str, int], ...]:
    """Linked paths, each with the place among a study's paths of the one whose value it takes.

    A link that leads nowhere, of which `name_faults` tells, is left out.
    """
    places = {path: place for place, path in enumerate(table[study.table])}
    linked = table.get("linked") or {}
    ends = {path: _chain(path, linked)[-1] for path in linked}
    return tuple((path, places[end]) for path, end in ends.items() if end in places)


def asked_outcomes(study: Study, table: Mapping[str, Any]) -> list[Named]:
    """Outcomes that are asked for, then those with limits that are not among them."""
    listed = enumerate(table.get("outcomes") or [])
    asked = [(f"{study.name}.outcomes[{place}]", name) for place, name in listed]
    wanted = [(study.name, table)]
    wanted += [
        (f"{study.name}.objectives[{place}]", entry)
        for place, entry in enumerate(table.get("objectives") or [])
    ]
    asked += [
        (f"{prefix}.{word}", entry[word])
        for prefix, entry in wanted
        for word in ("maximize", "minimize")
        if entry.get(word) is not None
    ]
    asked = [(key, name) for key, name in asked if isinstance(name, str)]
    known = {name for _, name in asked}
    for limits in ("constraints", "limits"):
        asked += [
            (f'{study.name}.{limits}."{name}"', name)
            for name in table.get(limits) or {}
            if name not in known
        ]
    return asked


def _link_faults(
    study: Study, table: Mapping[str, Any], every_path: bool
) -> Iterator[tuple[str, str, str]]:
    """Path, what was found and what was expected of every link that leads nowhere."""
    paths: Sequence[str] = list(table.get(study.table) or {})
    linked: Mapping[str, str] = table.get("linked") or {}
    for path in linked:
        chain = _chain(path, linked)
        if path in paths:
            said = f"{path}, which is {study.participle} itself"
            yield path, said, f"a path that is not itself {study.participle}"
        elif chain[-1] in chain[:-1]:
            expected = f"links that end at a path of {study.name}.{study.table}"
            yield path, " follows ".join(chain), expected
        elif chain[-1] not in paths and every_path:
            expected = f"a path of {study.name}.{study.table}: {', '.join(paths)}"
            yield path, f"{chain[-1]}, which is not {study.participle}", expected


def _chain(path: str, linked: Mapping[str, str]) -> list[str]:
    """Paths from one to what it follows in the end, or to the first one again."""
    chain = [path]
    while (leader := linked.get(chain[-1])) is not None:
        chain.append(leader)
        if leader in chain[:-1]:
            break
    return chain
