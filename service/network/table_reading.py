"""Columns of values as sent, read into arrays; every fault is found, none stops the reading.

What is faulty comes out as absent, so that no later check sees a guess; its row is marked in
``TableFaults.bad``. Values that repeat are checked once.
"""

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass
from typing import Final

import numpy as np

from service.network.canonical import canonical_json
from service.network.column_making import (
    ABSENT,
    as_ids,
    by_row,
    no_decimals,
    no_texts,
    texts_column,
    without,
)
from service.network.columns import BoolArray, CodeArray, Decimals, IdArray, Texts
from service.network.exact_numbers import ExactNumbers
from service.network.files.json import Number
from service.network.quantities import (
    NOT_A_NUMBER,
    TOO_LARGE,
    ReadDecimals,
    read_decimals,
    too_many_decimals,
)
from service.network.scanned import ScannedIds, ScannedNumbers
from service.network.sheets import Column
from service.network.table_faults import TableFaults
from service.network.wording import (
    EXTRA_ADVICE,
    ID_ADVICE,
    TAGS_ADVICE,
    are_ids,
    is_extra,
    is_id,
    is_id_list,
)

NONE: Final = type(None)
FAULTY: Final = -2
# A thing that is known but was itself refused: the row is left out without a fault of its own.
UNSURE: Final = -3

TEXT_WANTED: Final = "Send text."
NUMBER_WANTED: Final = "Send a number, or a number as text."


@dataclass(frozen=True, slots=True)
class Spelled:
    """What a text means: ``text`` as it is kept, or None with the advice that refuses it."""

    text: str | None
    code: str = ""
    detail: str = ""


# Names a thing that is itself refused: no fault of this value, but nothing to plan with either.
UNSURE_WORD: Final = Spelled(None)


class TableReader:
    """Reads the fields of one table, one after the other."""

    def __init__(self, faults: TableFaults) -> None:
        """Read the sheet that ``faults`` is about."""
        self._faults = faults
        self._columns = faults.sheet.columns
        self.rows = faults.sheet.rows
        for name, column in self._columns.items():
            self._refuse_odd(name, column)

    def require(self, name: str, present: BoolArray) -> None:
        """Report rows in which a field that every row needs is missing."""
        detail = f"Every row of {self._faults.sheet.name} needs {name}."
        if name in self._faults.sheet.refused:
            self._faults.bad[:] = True
            return
        if name not in self._columns and not self._faults.sheet.in_rows:
            self._faults.missing_column(name, detail)
            return
        rows = np.flatnonzero(~present & ~self._faults.faulty(name))
        self._faults.at_rows(name, rows, "missing_field", detail)

    def given(self, name: str) -> BoolArray:
        """Return in which rows a field has a value at all, sound or not."""
        column = self._columns.get(name)
        if column is None:
            return np.zeros(self.rows, dtype=np.bool_)
        has = np.fromiter((value is not None for value in column.values), dtype=np.bool_)
        return by_row(column, has)

    def codes(self, name: str, known: Mapping[str, int], *, unknown: str, thing: str) -> CodeArray:
        """Return the position of each id in ``known``, else ABSENT, FAULTY or UNSURE."""
        column, values = self._texts(name)
        if column is None:
            return np.full(self.rows, ABSENT, dtype=np.int32)
        distinct: dict[str | None, int] = {
            text: FAULTY if text is None else known.get(text, FAULTY)
            for text in dict.fromkeys(values)
        }
        distinct[None] = ABSENT
        found = np.fromiter(map(distinct.__getitem__, values), dtype=np.int32, count=len(values))
        wrong = np.flatnonzero(found == FAULTY)
        detail = f"There is no {thing} of this id. Add it to the network, or correct the id."
        self._faults.at_values(name, wrong, unknown, detail)
        by_rows = by_row(column, found)
        self._faults.bad |= by_rows == UNSURE
        return by_rows

    def texts(self, name: str, spell: Callable[[str], Spelled]) -> Texts:
        """Return a column of texts in their one spelling."""
        column, values = self._texts(name)
        if column is None:
            return no_texts(self.rows)
        spelled = {text: spell(text) for text in dict.fromkeys(values) if text is not None}
        refused = {text: word for text, word in spelled.items() if word.text is None}
        if refused:
            self._refuse_texts(name, values, refused)
        kept = {text: word.text for text, word in spelled.items()}
        return texts_column(column, values, kept)

    def ids(self, name: str) -> IdArray:
        """Return the id of each row as sent, ``b""`` where there is none or a faulty one."""
        column = self._columns.get(name)
        if column is None:
            return np.zeros(self.rows, dtype="S1")
        if isinstance(column.values, ScannedIds) and column.values.ascii_only:
            # At most 64 characters that are no controls: they were found to be ids on the way.
            return column.values.ids if column.take is None else column.values.ids[column.take]
        _, values = self._texts(name)
        if not are_ids([text for text in values if text is not None]):
            wrong = [
                place for place, text in enumerate(values) if text is not None and not is_id(text)
            ]
            self._faults.at_values(name, wrong, "bad_id", ID_ADVICE)
            for place in wrong:
                values[place] = None
        ids = as_ids(values)
        return ids if column.take is None else ids[column.take]

    def decimals(self, name: str, *, decimals_max: int, least: int | None) -> Decimals:
        """Return a column of exact decimals, none below ``least`` (None: any)."""
        column = self._columns.get(name)
        if column is None:
            return no_decimals(self.rows)
        read = self._decimals_of(name, column.values, decimals_max)
        if least is not None and bool((read.values < least).any()):
            wrong = read.present & (read.values < least)
            detail = "A negative number makes no sense here."
            self._faults.at_values(name, np.flatnonzero(wrong), "negative_number", detail)
            read = without(read, wrong)
        if column.take is None:
            return read
        return Decimals(
            values=read.values[column.take],
            present=read.present[column.take],
            exponent=read.exponent,
        )

    def small(self, name: str, *, most: int) -> CodeArray:
        """Return a column of whole numbers from 1 to ``most``, 0 where absent."""
        column = self._columns.get(name)
        if column is None:
            return np.zeros(self.rows, dtype=np.int32)
        if isinstance(column.values, ScannedNumbers) and not column.values.quoted:
            whole, odd = column.values.small(most)
            detail = f"Say a whole number from 1 to {most}."
            self._faults.at_values(name, odd, "bad_number", detail)
            return by_row(column, whole)
        accepted: dict[object, int] = {Number(number): number for number in range(1, most + 1)}
        found = np.zeros(len(column.values), dtype=np.int32)
        wrong: list[int] = []
        for place, value in enumerate(column.values):
            if value is None:
                continue
            if isinstance(value, Number) and value in accepted:
                found[place] = accepted[value]
            else:
                wrong.append(place)
        self._faults.at_values(name, wrong, "bad_number", f"Say a whole number from 1 to {most}.")
        return by_row(column, found)

    def lists(self, name: str, known: Mapping[str, int] | None = None, *, empty: bool) -> Texts:
        """Return a column of arrays of ids as sorted JSON arrays; ``empty`` ones count as absent.

        With ``known``, every element must be one of its keys.
        """

        def spell(value: object) -> Spelled:
            if not is_id_list(value):
                return Spelled(None, "wrong_type", TAGS_ADVICE)
            elements: list[str] = value  # type: ignore[assignment] # is_id_list says so
            if not elements:
                detail = "Name at least one, or leave the field out."
                return Spelled("") if empty else Spelled(None, "empty_list", detail)
            if known is not None and not all(element in known for element in elements):
                strange = next(element for element in elements if element not in known)
                return Spelled(None, "unknown_site", f"There is no site of the id '{strange}'.")
            if known is not None and any(known[element] == UNSURE for element in elements):
                return UNSURE_WORD
            return Spelled(canonical_json(sorted(elements)).decode())

        return self.structures(name, spell)

    def extras(self, name: str = "extra") -> Texts:
        """Return a column of objects of text as canonical JSON; empty ones count as absent."""

        def spell(value: object) -> Spelled:
            if not is_extra(value):
                return Spelled(None, "bad_extra", EXTRA_ADVICE)
            return Spelled(canonical_json(value).decode() if value else "")

        return self.structures(name, spell)

    def structures(self, name: str, spell: Callable[[object], Spelled]) -> Texts:
        """Return a column of arrays or objects, each as the text that ``spell`` makes of it."""
        column = self._columns.get(name)
        if column is None:
            return no_texts(self.rows)
        texts: list[str | None] = []
        wrong: dict[tuple[str, str], list[int]] = {}
        for place, value in enumerate(column.values):
            word = Spelled("") if value is None else spell(value)
            if word.text is None:
                wrong.setdefault((word.code, word.detail), []).append(place)
            texts.append(word.text or None)
        unsure = wrong.pop((UNSURE_WORD.code, UNSURE_WORD.detail), [])
        self._faults.bad[column.rows_with(np.array(unsure, dtype=np.int64), self.rows)] = True
        for (code, detail), places in wrong.items():
            self._faults.at_values(name, places, code, detail)
        return texts_column(column, texts, {text: text for text in texts if text is not None})

    def _refuse_odd(self, name: str, column: Column) -> None:
        """Report the cells of a file that no field could have; their values are absent already."""
        by_advice: dict[tuple[str, str], list[int]] = {}
        for position, cell in column.odd.items():
            by_advice.setdefault((cell.code, cell.detail), []).append(position)
        for (code, detail), positions in by_advice.items():
            self._faults.at_values(name, sorted(positions), code, detail)

    def _texts(self, name: str) -> tuple[Column | None, list[str | None]]:
        """Return the values of a column of text; what is no text is reported and becomes None."""
        column = self._columns.get(name)
        if column is None:
            return None, []
        values = list(column.values)
        if set(map(type, values)) - {str, NONE}:
            wrong = [place for place, value in enumerate(values) if type(value) not in (str, NONE)]
            self._faults.at_values(name, wrong, "wrong_type", TEXT_WANTED)
            for place in wrong:
                values[place] = None
        return column, values  # type: ignore[return-value] # only text and None are left

    def _decimals_of(self, name: str, values: Sequence[object], decimals_max: int) -> Decimals:
        """Return the values of a column as decimals and report the faulty ones."""
        if isinstance(values, ExactNumbers | ScannedNumbers):
            return self._report_decimals(name, values.read(decimals_max), decimals_max)
        kinds = set(map(type, values))
        if kinds - {str, Number, NONE}:
            wrong = [
                place
                for place, value in enumerate(values)
                if type(value) not in (str, Number, NONE)
            ]
            self._faults.at_values(name, wrong, "wrong_type", NUMBER_WANTED)
            strange = set(wrong)
            values = [None if place in strange else value for place, value in enumerate(values)]
            kinds.add(NONE)
        present: BoolArray | None = None
        if NONE in kinds:
            present = np.fromiter((value is not None for value in values), dtype=np.bool_)
            values = ["" if value is None else value for value in values]
        read = read_decimals(
            values,  # type: ignore[arg-type] # only text is left
            present=present,
            decimals_max=decimals_max,
        )
        return self._report_decimals(name, read, decimals_max)

    def _report_decimals(self, name: str, read: ReadDecimals, decimals_max: int) -> Decimals:
        """Return the sound decimals of a column and report the faulty ones."""
        for places, (code, detail) in (
            (read.malformed, NOT_A_NUMBER),
            (read.too_fine, too_many_decimals(decimals_max)),
            (read.too_large, TOO_LARGE),
        ):
            self._faults.at_values(name, places, code, detail)
        return read.decimals

    def _refuse_texts(
        self, name: str, values: Sequence[str | None], refused: Mapping[str, Spelled]
    ) -> None:
        """Report the places of refused texts, those of one advice together."""
        by_advice: dict[tuple[str, str], list[int]] = {}
        for place, text in enumerate(values):
            if text is not None and text in refused:
                word = refused[text]
                by_advice.setdefault((word.code, word.detail), []).append(place)
        for (code, detail), places in by_advice.items():
            self._faults.at_values(name, places, code, detail)
