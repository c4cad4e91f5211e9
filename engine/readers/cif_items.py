"""Reflections of a CIF data block: dictionary names to quantities."""

from __future__ import annotations

from collections.abc import Mapping, Sequence

import numpy as np

from engine.arrays import FloatArray
from engine.errors import InputError
from engine.readers.cif import CifBlock, numbers, read_document
from engine.readers.cif_crystal import read_crystal
from engine.readers.mapping import CATEGORIES, STATUS_LETTERS, Status, dictionary_item
from engine.readers.table import INDICES, ReadTable, Remark, make_table

_OWN_SIGMA = {
    "amplitude": "amplitude_sigma",
    "f_squared": "f_squared_sigma",
    "intensity": "intensity_sigma",
    "intensity_net": "intensity_net_sigma",
    "phase_deg": "phase_sigma_deg",
}


def read_cif(data: bytes, *, block: str | None = None, category: str | None = None, source: str = "") -> ReadTable:
    """The reflections of a CIF, with cell, symmetry and radiation of their data block.

    Understood are the categories REFLN (core dictionary in both spellings, macromolecular
    dictionary) and DIFFRN_REFLN; the items are those of ``engine.readers.mapping``. An
    uncertainty in brackets behind a value counts where no item of its own gives it.

    Parameters
    ----------
    data : bytes
    block : str, optional
        Name of the data block; needed where several have reflections.
    category : {"refln", "diffrn_refln"}, optional
        Needed where the block has both.
    source : str
        File name for messages.

    Raises
    ------
    InputError
        Not a CIF, no reflections, several data blocks or categories of them and no choice, a
        value that is not a number, and all that `engine.readers.table.make_table` refuses.
    """
    where = (source,) if source else ()
    blocks, remarks = read_document(data, source)
    chosen = _chosen_block(blocks, block, where)
    kind = _chosen_category(chosen, category, where)
    names = _names(chosen, kind, where)
    columns, notes = _columns(chosen, names, source)
    crystal, doubts = read_crystal(chosen, source)
    unread = _unread(chosen, kind, names)
    return make_table(
        columns,
        names,
        kind="cif",
        source=source,
        block=chosen.name,
        category=kind,
        crystal=crystal,
        remarks=(*remarks, *doubts, *notes, *unread),
    )


def _categories(block: CifBlock) -> tuple[str, ...]:
    """Categories of which the block has indices of reflections."""
    found = {item[0] for name in block.items if (item := dictionary_item(name)) and item[1] in INDICES}
    return tuple(name for name in CATEGORIES if name in found)


def _chosen_block(blocks: Sequence[CifBlock], asked: str | None, where: tuple[str, ...]) -> CifBlock:
    names = ", ".join(block.name for block in blocks)
    if asked is not None:
        for block in blocks:
            if block.name == asked.lower().removeprefix("data_") or block.name == asked.lower():
                if not _categories(block):
                    raise InputError(where, f"the data block {block.name!r} has no reflections", "choose another")
                return block
        raise InputError(where, f"there is no data block {asked[:40]!r}", f"choose one of {names}")
    full = [block for block in blocks if _categories(block)]
    if not full:
        raise InputError(where, f"no data block has reflections (blocks: {names})", "give a file with a loop of them")
    if len(full) > 1:
        told = ", ".join(block.name for block in full)
        raise InputError(where, f"{len(full)} data blocks have reflections", f"choose the block, one of {told}")
    return full[0]


def _chosen_category(block: CifBlock, asked: str | None, where: tuple[str, ...]) -> str:
    present = _categories(block)
    if asked is None:
        if len(present) > 1:
            raise InputError(
                where,
                f"the data block {block.name!r} has merged reflections and single measurements",
                f"choose the category, one of {', '.join(present)}",
            )
        return present[0]
    if asked not in present:
        raise InputError(
            where,
            f"the data block {block.name!r} has no category {asked[:40]!r} of reflections",
            f"choose one of {', '.join(present)}",
        )
    return asked


def _names(block: CifBlock, category: str, where: tuple[str, ...]) -> dict[str, str]:
    """Quantity to data name, of the loop that holds the indices."""
    loops = [set(loop) for loop in block.loops if any(_is_index(name, category) for name in loop)]
    if len(loops) > 1:
        raise InputError(where, f"the indices of {category} stand in several loops", "give them in one loop")
    looped = {name for loop in block.loops for name in loop}
    within = loops[0] if loops else set(block.items) - looped
    names: dict[str, str] = {}
    for name in block.items:
        item = dictionary_item(name)
        if name not in within or item is None or item[0] != category:
            continue
        if item[1] in names and item[1] != "status":
            raise InputError(
                where, f"the items {names[item[1]]} and {name} both give {item[1]}", "remove one of the two"
            )
        names.setdefault(item[1], name)
    return names


def _is_index(name: str, category: str) -> bool:
    item = dictionary_item(name)
    return item is not None and item[0] == category and item[1] in INDICES


def _columns(block: CifBlock, names: dict[str, str], source: str) -> tuple[dict[str, FloatArray], list[Remark]]:
    columns: dict[str, FloatArray] = {}
    remarks: list[Remark] = []
    for quantity, name in list(names.items()):
        values = block.items[name]
        if quantity == "status":
            columns[quantity] = _statuses(values, name, remarks)
            continue
        columns[quantity], bracketed = numbers(values, name, source)
        sigma = _OWN_SIGMA.get(quantity)
        if sigma is None or np.isnan(bracketed).all():
            continue
        if sigma in names:
            words = f"the uncertainties in brackets in {name} are passed over, since {names[sigma]} gives them"
            remarks.append(Remark("unread", (name,), words))
        else:
            columns[sigma], names[sigma] = bracketed, name
    empty = [quantity for quantity, column in columns.items() if np.isnan(column).all() and quantity not in INDICES]
    for quantity in empty:
        # A column of nothing but ? is not a quantity that is present.
        del columns[quantity]
        name = names.pop(quantity)
        remarks.append(Remark("absent", (name,), f"{name} has no known value in any row"))
    return columns, remarks


def _statuses(values: Sequence[str], name: str, remarks: list[Remark]) -> FloatArray:
    letters, place = np.unique(np.array(values), return_inverse=True)
    codes = {**STATUS_LETTERS, "?": Status.UNSTATED, ".": Status.UNSTATED}
    strange = [letter for letter in letters.tolist() if letter not in codes]
    if strange:
        count = int(np.count_nonzero(np.isin(values, strange)))
        told = ", ".join(repr(letter[:20]) for letter in strange[:10])
        words = f"{count} rows have a {name} that the dictionary has not ({told}) and count as unstated"
        remarks.append(Remark("unread", (name,), words))
    numbered = np.array([codes.get(letter, Status.UNSTATED) for letter in letters.tolist()], dtype=np.float64)
    return np.asarray(numbered[place], dtype=np.float64)


def _unread(block: CifBlock, category: str, names: Mapping[str, str]) -> list[Remark]:
    used = set(names.values())
    prefixes = (f"_{category}_", f"_{category}.")
    passed = tuple(name for name in block.items if name.startswith(prefixes) and name not in used)
    # Old names of other categories begin alike: _refln_ is no prefix of _reflns_, but of _refln_sint/lambda.
    if not passed:
        return []
    return [Remark("unread", passed, f"the items {', '.join(passed)} were not read")]
