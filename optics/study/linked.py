"""Links of a study: numbers that take the value of another one."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import TYPE_CHECKING, NamedTuple

from optics.device.errors import Fault

if TYPE_CHECKING:
    from optics.device.case import Case


class Varied(NamedTuple):
    """What a study varies, and how it speaks of it."""

    study: str  # its table, such as "sweep"
    table: str  # where the paths stand in it, such as "axes"
    participle: str  # such as "swept"
    paths: Sequence[str]


def find_followers(
    case: Case, varied: Varied, linked: Mapping[str, str], faults: list[Fault]
) -> tuple[tuple[str, int], ...]:
    """Follow every link to the varied number at its end.

    Parameters
    ----------
    case : Case
    varied : Varied
    linked : mapping of str to str
        Leader by path, as in the study's table `linked`.
    faults : list of Fault
        Gains links of numbers that are varied themselves, in circles, or to none that is varied.

    Returns
    -------
    tuple of (str, int)
        Linked paths, each with the place of its leader in `varied.paths`.
    """
    places = {path: place for place, path in enumerate(varied.paths)}
    found: list[tuple[str, int]] = []
    for path, leader in linked.items():
        key = f'{varied.study}.linked."{path}"'
        if path in places:
            expected = "a path that is not itself " + varied.participle
            said = f"{path}, which is {varied.participle} itself"
            faults.append(Fault(case.label, key, said, expected))
            continue
        seen = [path]
        while leader in linked and leader not in seen:
            seen.append(leader)
            leader = linked[leader]
        if leader in seen:
            circle = " follows ".join([*seen, leader])
            expected = f"links that end at a path of {varied.study}.{varied.table}"
            faults.append(Fault(case.label, key, circle, expected))
        elif leader not in places:
            expected = f"a path of {varied.study}.{varied.table}: {', '.join(places)}"
            said = f"{leader}, which is not {varied.participle}"
            faults.append(Fault(case.label, key, said, expected))
        else:
            found.append((path, places[leader]))
    return tuple(found)
