"""Checks of a machine description as a whole: what no part can see by itself."""

from __future__ import annotations

import difflib
from collections.abc import Iterable, Sequence
from typing import TYPE_CHECKING

from pvcard.errors import MachineError

if TYPE_CHECKING:
    from pvcard.machine_parts import Cylinder, LoadStep, Machine

Path = tuple[str | int, ...]


class PartError(MachineError):
    """A part that contradicts itself; `path` leads to the key within that part."""

    def __init__(
        self,
        path: Path,
        problem: str,
        *,
        found: str | None = None,
        expected: str | None = None,
        advice: str | None = None,
    ) -> None:
        """Keep the path beside the words of the message."""
        self.path = path
        place = ".".join(str(step) for step in path)
        super().__init__(problem, place=place, found=found, expected=expected, advice=advice)


def nearest(word: str, known: Iterable[str]) -> str | None:
    """Return the known word closest to a mistyped one.

    Parameters
    ----------
    word : as typed
    known : the words there are

    Returns
    -------
    near : None where nothing is close

    Examples
    --------
    >>> nearest("boer", ["bore", "stroke"])
    'bore'
    """
    by_fold = {name.casefold(): name for name in known}
    near = difflib.get_close_matches(word.casefold().strip(), by_fold, n=1, cutoff=0.6)
    return by_fold[near[0]] if near else None


def pick(word: str, known: Iterable[str], what: str) -> str:
    """Return the name that `word` means, capitals and outer blanks forgiven.

    Parameters
    ----------
    word : as typed
    known : the names there are
    what : what they name, for the message

    Returns
    -------
    name : as in `known`

    Raises
    ------
    MachineError : names the nearest known one and lists all
    """
    names = list(known)
    if word in names:
        return word
    same = [name for name in names if name.casefold().strip() == word.casefold().strip()]
    if len(same) == 1:
        return same[0]
    near = nearest(word, names)
    raise MachineError(
        f"no {what} of this name is declared",
        found=repr(word),
        expected="one of " + ", ".join(names) if names else f"none: no {what} is declared",
        advice=f'Did you mean "{near}"?' if near else None,
    )


def check_machine(machine: Machine) -> None:
    """Refuse a machine whose parts contradict one another.

    Parameters
    ----------
    machine : while it is being made

    Returns
    -------
    nothing : or `PartError` is raised
    """
    if not machine.cylinders:
        raise PartError(
            ("cylinder",), "no cylinder is declared", expected="at least one [[cylinder]] table"
        )
    _check_names([cylinder.name for cylinder in machine.cylinders])
    _check_stages(machine)
    _check_throws(machine.cylinders)
    for index, cylinder in enumerate(machine.cylinders):
        if (
            machine.gas is None
            and cylinder.gas is None
            and machine.stage(cylinder.stage).gas is None
        ):
            raise PartError(
                ("cylinder", index, "gas"),
                "no gas is declared for this cylinder",
                expected="a [gas] table for the machine, or gas in its [[stage]] or [[cylinder]]",
                advice="Write for example [gas] and below it composition = { methane = 1.0 }",
            )
    for index, step in enumerate(machine.load_steps):
        _check_step(machine, index, step)


def _check_names(names: Sequence[str]) -> None:
    seen: set[str] = set()
    for index, name in enumerate(names):
        if name.casefold() in seen:
            raise PartError(
                ("cylinder", index, "name"),
                "two cylinders have the same name",
                found=repr(name),
                advice="Give each cylinder a name of its own",
            )
        seen.add(name.casefold())


def _check_stages(machine: Machine) -> None:
    numbers = [stage.number for stage in machine.stages]
    for index, number in enumerate(numbers):
        if number < 1 or number in numbers[:index]:
            raise PartError(
                ("stage", index, "number"),
                "stages are numbered 1, 2, 3 ..., each once",
                found=str(number),
            )
    for index, cylinder in enumerate(machine.cylinders):
        if cylinder.stage not in numbers:
            raise PartError(
                ("cylinder", index, "stage"),
                "this stage is not declared",
                found=str(cylinder.stage),
                expected="one of " + ", ".join(str(number) for number in numbers),
                advice=f"Add a [[stage]] table with number = {cylinder.stage}",
            )


def _check_throws(cylinders: Sequence[Cylinder]) -> None:
    first: dict[int, Cylinder] = {}
    for index, cylinder in enumerate(cylinders):
        if cylinder.throw < 1:
            raise PartError(
                ("cylinder", index, "throw"),
                "throws are numbered from 1",
                found=str(cylinder.throw),
            )
        other = first.setdefault(cylinder.throw, cylinder)
        for key in ("stroke", "connecting_rod_length", "dead_centre"):
            mine, its = getattr(cylinder, key), getattr(other, key)
            if abs(mine - its) > 1e-6 * max(abs(its), 1e-3):
                unit = "deg" if key == "dead_centre" else "m"
                raise PartError(
                    ("cylinder", index, key),
                    f"cylinders on one throw share a rod, but {key} differs from that of "
                    f"{other.name} on throw {cylinder.throw}",
                    found=f"{mine:g} {unit}",
                    expected=f"{its:g} {unit}",
                    advice="If they do not share a rod, give each its own throw",
                )


def _check_step(machine: Machine, index: int, step: LoadStep) -> None:
    names = [cylinder.name for cylinder in machine.cylinders]
    for name in step.cylinders or ():
        if name not in names:
            raise PartError(
                ("load_step", index, "cylinders"),
                "no cylinder of this name is declared",
                found=repr(name),
                expected="one of " + ", ".join(names),
            )
    for other in machine.load_steps[:index]:
        shared = [name for name in names if step.covers(name) and other.covers(name)]
        if other.name.casefold() == step.name.casefold() and shared:
            raise PartError(
                ("load_step", index, "name"),
                f"this load step is declared twice for {', '.join(shared)}",
                found=repr(step.name),
                advice="Give it another name, or name its cylinders: cylinders = [...]",
            )
    _check_step_ends(machine, index, step)


def _check_step_ends(machine: Machine, index: int, step: LoadStep) -> None:
    covered = [cylinder for cylinder in machine.cylinders if step.covers(cylinder.name)]
    for key, setting in (("head_end", step.head_end), ("crank_end", step.crank_end)):
        touched = setting.state != "loaded" or setting.added_clearance > 0
        if touched and not any(getattr(cylinder, key).compresses for cylinder in covered):
            raise PartError(
                ("load_step", index, key),
                f"the {key} of {', '.join(c.name for c in covered)} does not compress, "
                "a load step cannot change it",
                advice=f"Leave out {key} here, or open_to at the cylinder",
            )
