"""What lies outside the program in memory: device registers at fixed addresses, and volatile objects that no unit
defines.

A load from one gives what the outside gives, a store to one tells the outside something; between the two nothing is
kept. A register in a structure is known by the address that the structure is reached at.
"""

from collections.abc import Callable
from dataclasses import dataclass, field
from typing import Any

from stepring.paths.memory import Cells, Memory, new_cells
from stepring.paths.program import Program
from stepring.paths.types import Unsettled


@dataclass(slots=True)
class Devices:
    """The registers during one call.

    ``ask`` is given a register's name (its address as ``0xc6``, or the object's name) and gives the value of one load,
    None where there is none. ``told`` collects the stores as (name, value), the value as an unsigned number.
    """

    program: Program
    memory: Memory
    ask: Callable[[str], int | None]
    told: list[tuple[str, int]] = field(default_factory=list)
    blocks: dict[tuple[int, int], Cells] = field(default_factory=dict)
    outer: dict[str, Cells | None] = field(default_factory=dict)
    pending: tuple[str, Cells] | None = None

    def register(self, address: int, size: int, kind: str) -> Any:
        """What the interpreter asks for at a fixed address: a pointer to the register's bytes for this access."""
        self.settle()
        name = f"0x{address:x}"
        cells = self.blocks.get((address, size))
        if cells is None:
            cells = self.blocks[address, size] = new_cells(f"the register at {name}", max(1, size), address, zero=True)
        if kind == "load":
            _fill(cells, self._asked(name))
        else:
            self.pending = (name, cells)
        return (cells, 0, 0, cells.size)

    def volatile(self, memory: Memory, text: str, kind: str) -> None:
        """What the interpreter tells of an access to a volatile object just before it happens."""
        self.settle()
        cells = self._undefined(text)
        if cells is None:
            return
        if kind == "load":
            cells.known = None
            _fill(cells, self._asked(text))
        else:
            self.pending = (text, cells)

    def settle(self) -> None:
        """Note the value of a store that has happened since the last access."""
        if self.pending is not None:
            name, cells = self.pending
            self.told.append((name, int.from_bytes(cells.data, "little")))
            self.pending = None

    def _asked(self, name: str) -> int:
        value = self.ask(name)
        if value is None:
            raise Unsettled(f"{name} was given no value to be read")
        return value

    def _undefined(self, text: str) -> Cells | None:
        """The cells of a volatile object by its name, if no unit defines it and it is a plain number."""
        if text not in self.outer:
            number = self.program.numbers.get((-1, text))
            static = self.program.statics[number] if number is not None else None
            plain = static is not None and not static.defined and static.size is not None and static.size <= 8
            self.outer[text] = self.memory.cells[number] if plain and number is not None else None
        return self.outer[text]


def _fill(cells: Cells, value: int) -> None:
    """Give a register its value; in a block of several, every 32-bit register gets it."""
    width = cells.size if cells.size in (1, 2, 4, 8) else 4
    word = (value & ((1 << 8 * width) - 1)).to_bytes(width, "little")
    cells.data[:] = (word * (cells.size // width + 1))[: cells.size]
