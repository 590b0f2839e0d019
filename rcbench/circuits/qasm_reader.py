"""The statements of an OpenQASM program, one after the other, into rows of a circuit."""

from __future__ import annotations

import math
import re
from collections.abc import Callable, Sequence
from functools import lru_cache

from rcbench.circuits.qasm_definitions import CALL, NAME, DefinitionError, gate_set, read_call, split_arguments
from rcbench.circuits.qasm_expressions import ExpressionError
from rcbench.circuits.qasm_gates import RECOGNISE, Angles, Gate
from rcbench.circuits.qasm_library import NAMES
from rcbench.circuits.qasm_outline import REFUSED, Outline, number
from rcbench.circuits.qasm_registers import MAX_BITS, MAX_QUBITS, Registers, read_sized, some, split_operands
from rcbench.circuits.qasm_rows import Rows
from rcbench.errors import InputError

_WORD = re.compile(rf"\s*+({NAME})(.*)", re.DOTALL)
_ASSIGNED = re.compile(r"([^=]*+)=\s*+measure\b(.*)", re.DOTALL)
_BITS = re.compile(rf"\s*+(?:\[([^\[\]]*+)\]\s*+)?({NAME})\s*+(?:=(.*))?", re.DOTALL)
_LABEL = re.compile(r"\$\d+")


class Reader:
    """Reads the statements of one program."""

    def __init__(self, program: Outline) -> None:
        self.program = program
        self.qubits = Registers("qubit", MAX_QUBITS, program.whole)
        self.bits = Registers("bit", MAX_BITS, program.whole)
        self.rows = Rows()
        self.opaque: dict[str, int] = {}  # statement that declares each
        self._taken: dict[int, int] = {}  # qubit measured into each bit
        self.gates = gate_set(
            program.version,
            program.source.libraries,
            tuple(program.definitions.values()),
            tuple(program.constants.items()),
        )
        # what the quick path looks up: gates that are one row each, operands on one or two qubits, argument lists
        self._direct: dict[str, tuple[int, int, Angles | None, bool, Gate]] = {}
        self._pairs: dict[str, tuple[int, int]] = {}
        self._numbers: dict[str | None, Sequence[float]] = {None: []}
        self._handlers: dict[str, Callable[[str], None]] = {
            "qreg": self._qreg,
            "creg": self._creg,
            "qubit": self._qubit,
            "bit": self._bit,
            "output": self._output,
            "barrier": self._barrier,
            "reset": self._reset,
            "measure": self._measure,
            "let": self._let,
            "opaque": self._opaque,
            "nop": _nothing,
        }

    def read(self) -> None:
        """Read all statements.

        Raises:
            InputError: with file and line.
        """
        if "$" in self.program.source.code:
            labels = set(_LABEL.findall(self.program.source.code))
            self.qubits.declare_all(sorted(labels, key=lambda label: (len(label), label)))
        try:
            self._all()
        except DefinitionError as error:
            self._fail_in_definition(error)
        except ExpressionError as error:
            raise InputError("expression", error.found, error.allowed, self._where()) from None
        except InputError as error:
            raise error.at(self._where()) from None
        if self.program.source.missing:
            missing = self.program.source.missing[0]
            allowed = "a file beside the program or in a folder given by --include (no gate of it is used here)"
            raise InputError("include", missing.name, allowed, missing.where)

    def _where(self) -> str:
        return self.program.where(self.rows.statement)

    def _all(self) -> None:
        """The quick path for usual gate lines; whatever is not usual goes to `_statement`."""
        match_call, direct, pairs, numbers, rows = CALL.fullmatch, self._direct, self._pairs, self._numbers, self.rows
        add_row, add_first, parameters, measured = rows.rows.append, rows.first.append, rows.parameters, rows.measured
        for place, statement in enumerate(self.program.statements):
            match = match_call(statement)
            if match is not None:
                name, arguments, operands = match.groups()
                known, pair = direct.get(name), pairs.get(operands) or self._pair(operands)
                if known is not None and pair is not None and not measured:
                    code, count, angles, wide, gate = known
                    values = numbers.get(arguments)
                    if values is None:
                        values = self._values(arguments)
                    if len(values) == count and (pair[1] >= 0) is wide:
                        if code < 0:
                            rows.statement = place
                            rows.recognise(gate, values, pair)
                            continue
                        if angles is not None:
                            values = angles(values)
                        add_row((code, *pair))
                        if values:
                            add_first(len(parameters))
                            parameters += values
                        else:
                            add_first(-1)
                        continue
            rows.statement = place
            self._statement(statement)

    def _pair(self, operands: str) -> tuple[int, int] | None:
        """One or two different qubits that are written out, the second -1 for one; None for all else."""
        one, comma, two = operands.partition(",")
        first, second = self.qubits.index.get(one.strip()), self.qubits.index.get(two.strip()) if comma else -1
        if first is None or second is None or first == second:
            return None
        self._pairs[operands] = (first, second)
        return first, second

    def _values(self, arguments: str) -> Sequence[float]:
        """The numbers of an argument list."""
        try:
            values = [*map(float, arguments.split(","))]
            if math.isfinite(sum(values)):
                return values
        except ValueError:
            pass
        known = self.program.constants
        if not arguments.strip():
            values = []
        elif known:
            values = [number(one, known, self.program.version) for one in split_arguments(arguments)]
        else:
            values = [_number(one, self.program.version) for one in split_arguments(arguments)]
        self._numbers[arguments] = values
        return values

    # ------------------------------------------------------------------ one statement

    def _statement(self, statement: str) -> None:
        if not statement.strip():
            return
        word = _WORD.fullmatch(statement)
        name, rest = word.groups() if word else ("", statement)
        handler = self._handlers.get(name)
        if handler is not None and (name not in self.gates or name in ("barrier", "measure", "reset")):
            handler(rest)
        elif name in REFUSED and name not in self.gates:
            if name == "OPENQASM" and self.program.offset(self.rows.statement) == _first(self.program.source.code):
                return
            if name == "const" and "=" in rest:
                return  # read before
            raise InputError("statement", statement.strip()[:60], REFUSED[name])
        elif assigned := _ASSIGNED.fullmatch(statement):
            self._measure_into(assigned.group(2), assigned.group(1))
        else:
            self._call(statement)

    def _call(self, statement: str) -> None:
        call = read_call(statement, self.program.constants)
        if call is None:
            allowed = "a gate, barrier, measurement or declaration of OpenQASM 2.0 or 3"
            raise InputError("statement", statement.strip()[:60], allowed)
        gate = self.gates.get(call.name)
        if gate is None:
            self._undefined(call.name)
            return
        values = self._values(call.arguments) if call.arguments is not None else []
        if len(values) != gate.n_parameters:
            raise InputError(f"gate {call.name}", f"{len(values)} parameters", f"{gate.n_parameters} parameters")
        gate = self.gates.modified(gate, call.modifiers)
        values = [*values, *(self.program.number(one) for one in call.exponents)]
        for qubits in self._broadcast(gate, call.operands):
            self.rows.call(gate, values, qubits)
        if not call.modifiers:
            self._remember(call.name, gate)

    def _remember(self, name: str, gate: Gate) -> None:
        """Let later calls of a gate take the quick path, where they are one row each."""
        plan = gate.plan
        if plan.code >= 0 or plan.code == RECOGNISE:
            self._direct[name] = (plan.code, gate.n_parameters, plan.angles, gate.n_qubits == 2, gate)

    def _broadcast(self, gate: Gate, operands: str) -> list[tuple[int, ...]]:
        """The qubits of each call that a statement stands for."""
        found = [self.qubits.resolve(one) for one in split_operands(operands)]
        if len(found) != gate.n_qubits:
            raise InputError(f"gate {gate.name}", f"{len(found)} operands", f"{gate.n_qubits} qubits or registers")
        sizes = {len(elements) for elements, several in found if several}
        if len(sizes) > 1:
            raise InputError(f"gate {gate.name}", operands.strip()[:60], "registers of one size")
        count = sizes.pop() if sizes else 1
        self.rows.spend(count)
        calls = list(zip(*(elements if several else elements * count for elements, several in found), strict=True))
        for qubits in calls:
            if len(set(qubits)) != len(qubits):
                raise InputError(f"gate {gate.name}", operands.strip()[:60], "different qubits")
        return calls

    # ------------------------------------------------------------------ declarations

    def _declare(self, registers: Registers, name: str, size: str | None) -> None:
        if name in self.qubits or name in self.bits:
            raise InputError("register", name, "a name that is not declared before")
        registers.declare(name, size)

    def _old(self, registers: Registers, rest: str) -> None:
        sized = read_sized(rest)
        if sized is None:
            raise InputError("register", rest.strip()[:60], "name[size]")
        self._declare(registers, *sized)

    def _qreg(self, rest: str) -> None:
        self._old(self.qubits, rest)

    def _creg(self, rest: str) -> None:
        self._old(self.bits, rest)

    def _new(self, registers: Registers, rest: str) -> tuple[str, str | None]:
        match = _BITS.fullmatch(rest)
        if match is None:
            raise InputError("register", rest.strip()[:60], "[size] name")
        size, name, value = match.groups()
        self._declare(registers, name, size)
        return name, value

    def _qubit(self, rest: str) -> None:
        if self._new(self.qubits, rest)[1] is not None:
            raise InputError("qubit", rest.strip()[:60], "[size] name")

    def _bit(self, rest: str) -> None:
        name, value = self._new(self.bits, rest)
        if value is None:
            return
        measure = _WORD.fullmatch(value)
        if measure is not None and measure.group(1) == "measure":
            self._measure_into(measure.group(2), name)
        elif set(value.strip().strip('"')) - set("0_"):
            raise InputError("bit", value.strip()[:60], "no value, zeros, or a measurement")

    def _output(self, rest: str) -> None:
        word = _WORD.fullmatch(rest)
        if word is None or word.group(1) != "bit":
            raise InputError("output", rest.strip()[:60], "bits only")
        self._bit(word.group(2))

    def _let(self, rest: str) -> None:
        name, equals, value = rest.partition("=")
        sized = read_sized(name)
        if not equals or sized is None or sized[1] is not None:
            raise InputError("let", rest.strip()[:60], "name = qubits")
        parts = [self.qubits.resolve(one) for one in value.split("++")]
        elements = [element for part, _ in parts for element in part]
        if len(set(elements)) != len(elements):
            raise InputError("let", rest.strip()[:60], "different qubits")
        if sized[0] in self.bits:
            raise InputError("let", sized[0], "a name that is not declared before")
        self.rows.spend(len(elements))
        self.qubits.alias(sized[0], elements, len(parts) > 1 or parts[0][1])

    def _opaque(self, rest: str) -> None:
        word = _WORD.fullmatch(rest)
        if word is None:
            raise InputError("opaque", rest.strip()[:60], "opaque name(parameters) qubits;")
        self.opaque.setdefault(word.group(1), self.rows.statement)

    # ------------------------------------------------------------------ what is no gate

    def _barrier(self, rest: str) -> None:
        """A row where it names whole registers and with them all qubits; else it holds back gates and is no row."""
        found = [self.qubits.resolve(one) for one in split_operands(rest)]
        qubits = {qubit for elements, _ in found for qubit in elements}
        whole = not found or (len(qubits) == len(self.qubits) and all(several for _, several in found))
        self.rows.barrier(None if whole else sorted(qubits))

    def _reset(self, rest: str) -> None:
        for qubit in self.qubits.resolve(rest)[0]:
            self.rows.reset(qubit)

    def _measure(self, rest: str) -> None:
        source, arrow, target = rest.partition("->")
        if not arrow:
            raise InputError("measure", rest.strip()[:60], "a classical bit that the outcome goes to")
        self._measure_into(source, target)

    def _measure_into(self, source: str, target: str) -> None:
        (qubits, _), (bits, _) = self.qubits.resolve(source), self.bits.resolve(target)
        if len(qubits) != len(bits):
            raise InputError("measure", f"{len(qubits)} qubits into {len(bits)} bits", "as many bits as qubits")
        for qubit, bit in zip(qubits, bits, strict=True):
            if bit in self._taken:
                raise InputError("measure", f"into {self.bits.names[bit]} again", "one measurement into each bit")
            self._taken[bit] = qubit
            self.rows.measure(qubit, bit)

    # ------------------------------------------------------------------ errors

    def _undefined(self, name: str) -> None:
        """Raise the error about a gate that nothing defines, with all others of its sort in the program."""
        names = {name: None}
        for statement in self.program.statements[self.rows.statement :]:
            match = CALL.fullmatch(statement.rpartition("@")[2])
            if match and not (match.group(1) in self.gates or match.group(1) in self._handlers):
                names.setdefault(match.group(1))
        self._fail_undefined([one for one in names if one == name or one not in REFUSED], self._where())

    def _fail_undefined(self, names: list[str], where: str) -> None:
        listed = ", ".join(names[:20]) + (", ..." if len(names) > 20 else "")
        missing = self.program.source.missing
        if missing:
            allowed = f"a file beside the program or in a folder given by --include; nowhere defined: {listed}"
            raise InputError("include", ", ".join(one.name for one in missing), allowed, missing[0].where)
        first = names[0]
        if first in self.opaque:
            declared = self.program.where(self.opaque[first]).removesuffix(": ")
            allowed = f"gates with a definition: it is opaque, its matrix unknown ({declared})"
            raise InputError("gate", first, allowed, where)
        home = [file for file in ("qelib1.inc", "stdgates.inc") if first in NAMES[file]]
        more = f"; nowhere defined: {listed}" if len(names) > 1 else ""
        if home and not set(home) & self.program.source.libraries:
            raise InputError("gate", first, f'gates that are defined: include "{home[0]}" has it{more}', where)
        allowed = some(self.gates.names, first)
        raise InputError("gate", first, f"gates that are defined{more}; there are {allowed}", where)

    def _fail_in_definition(self, error: DefinitionError) -> None:
        start = self.program.bodies.get(error.name)
        where = self._where() if start is None else self.program.source.place(start + error.offset)
        if error.undefined:
            self._fail_undefined([error.undefined], where)
        raise error.error.at(where) from None


@lru_cache(maxsize=20_000)
def _number(text: str, version: int) -> float:
    """A number without constants; shared between programs, since most angles are of few kinds."""
    return number(text, {}, version)


def _nothing(rest: str) -> None:
    """A statement that does nothing."""


def _first(code: str) -> int:
    return len(code) - len(code.lstrip())
