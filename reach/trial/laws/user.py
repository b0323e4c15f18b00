"""A law from the user's own file: its class loaded, its answers checked, what it raises told with the line."""

from __future__ import annotations

import ast
import sys
from collections.abc import Mapping
from importlib.machinery import SourceFileLoader
from importlib.util import module_from_spec, spec_from_file_location
from inspect import getattr_static
from math import isfinite
from os.path import basename
from types import CodeType, TracebackType
from typing import Any

import numpy as np

from reach.errors import Fault, InputError, nearest
from reach.trial.laws.base import Seen, Setup, Twist

MODULE = "_reach_user_law"  # what a user's file is called among the modules; the last one loaded has the name
PARTS = 6
SHOWN = 200  # characters of an answer
RAISED = (Exception, SystemExit)  # whatever a user's code ends with, short of a key pressed


class LawFault(Exception):
    """A law failed or gave an answer that can't be sent.

    Attributes
    ----------
    text : what happened and where
    line : in the file of the law; 0 where it is not known
    """

    def __init__(self, text: str, line: int):
        super().__init__(text)
        self.text, self.line = text, line


class _Source(SourceFileLoader):
    """Reads the source and nothing else: no compiled copy is taken from beside it or left there."""

    def get_code(self, fullname: str) -> CodeType:
        """The code of the file as it stands."""
        source = self.get_data(self.path)
        code: CodeType = self.source_to_code(source, self.path)
        return code


def load(file: str, name: str) -> type:
    """The class of a name from a user's file.

    The file runs with all that the user may do. Whether it may run at all is decided by the caller before; nothing here
    asks. The class need not derive from `Law`: it has `__init__(self, setup)`, `twist(self, seen)` and, where it has
    gains, a dict `gains`.

    Raises
    ------
    InputError
        The file can't be read or fails while it is loaded, or has no such class.
    """
    spec = spec_from_file_location(MODULE, file, loader=_Source(MODULE, file))
    if spec is None or spec.loader is None:
        raise _fault(file, 1, "can't be loaded as Python")
    module = module_from_spec(spec)
    sys.modules[MODULE] = module
    try:
        spec.loader.exec_module(module)
    except RAISED as error:
        del sys.modules[MODULE]
        raise _fault(file, _line(error, file) or 1, f"fails while it is loaded: {_told(error)}") from error
    found = vars(module).get(name)
    line = _defined(file, name)
    if found is None:
        classes = [key for key, value in vars(module).items() if isinstance(value, type)]
        known = nearest(name, classes) if classes else "; it has no class at all"
        raise _fault(file, line, f'there is no class "{name}"{known}')
    if not isinstance(found, type):
        raise _fault(file, line, f'"{name}" is no class but {_an(found)}; name a class with a method "twist"')
    if not callable(getattr(found, "twist", None)):
        raise _fault(file, line, f'"{name}" has no method "twist(self, seen)"')
    return found


def own_gains(cls: type, file: str | None) -> dict[str, float]:
    """The gains that a class has by itself; InputError where they are no finite numbers by name."""
    gains = getattr(cls, "gains", {})
    where = file or cls.__module__
    if not isinstance(gains, Mapping):
        raise _fault(
            where, _defined(where, cls.__name__), f'"gains" is {_an(gains)}; it must be a dict by name'
        )
    for name, value in gains.items():
        number = isinstance(value, int | float) and not isinstance(value, bool) and isfinite(value)
        if not isinstance(name, str) or not number:
            what = f'gain {name!r} is {value!r}; "gains" has names and finite numbers'
            raise _fault(where, _defined(where, cls.__name__), what)
    return {name: float(value) for name, value in gains.items()}


def made(cls: type, setup: Setup) -> Any:
    """A law of a class; LawFault with the line where its `__init__` fails."""
    try:
        return cls(setup)
    except RAISED as error:
        raise _law_fault(cls, error) from error


def asked(law: Any, seen: Seen) -> Twist:
    """The twist that a law answers, six finite numbers; LawFault for anything else.

    Tuples, lists and arrays are taken.
    """
    try:
        answer = law.twist(seen)
    except RAISED as error:
        raise _law_fault(type(law), error) from error
    try:
        vx, vy, vz, wx, wy, wz = answer.tolist() if type(answer) is np.ndarray else answer
        straight = isfinite(vx) and isfinite(vy) and isfinite(vz)
        if straight and isfinite(wx) and isfinite(wy) and isfinite(wz):
            return float(vx), float(vy), float(vz), float(wx), float(wy), float(wz)
    except RAISED:
        pass
    raise _wrong(type(law), answer)


def _wrong(cls: type, answer: Any) -> LawFault:
    """What is wrong with an answer; its line is that of the method."""
    file, line = _home(cls)
    try:
        plain = type(answer) in (tuple, list, np.ndarray, type(None))
        shown = repr(answer)[:SHOWN] if plain else _an(answer)
        shape = np.shape(answer)
    except RAISED:
        shown, shape = _an(answer), (PARTS,)
    if shape not in ((), (PARTS,)):
        shown += f" of shape {shape}"
    text = f"twist must be six finite numbers, got {shown}"
    return LawFault(f"{text} ({basename(file)} line {line})" if line else text, line)


def _law_fault(cls: type, error: BaseException) -> LawFault:
    """What a law raised, with the innermost line of its file."""
    file, _ = _home(cls)
    line = _line(error, file)
    return LawFault(_told(error) + (f" ({basename(file)} line {line})" if line else ""), line)


def _home(cls: type) -> tuple[str, int]:
    """File and line of a class's `twist`; nothing and 0 where it is not written in Python."""
    code = getattr(getattr_static(cls, "twist", None), "__code__", None)
    return (code.co_filename, code.co_firstlineno) if isinstance(code, CodeType) else ("", 0)


def _line(error: BaseException, file: str) -> int:
    """The innermost line of a file that an exception came through, or that it can't be read at; 0 for none."""
    if isinstance(error, SyntaxError) and error.filename == file and error.lineno:
        return error.lineno
    found, trace = 0, error.__traceback__
    while isinstance(trace, TracebackType):
        if trace.tb_frame.f_code.co_filename == file:
            found = trace.tb_lineno
        trace = trace.tb_next
    return found


def _defined(file: str, name: str) -> int:
    """The line where a file gives a name its meaning; 1 where it does not."""
    try:
        with open(file, "rb") as source:
            tree = ast.parse(source.read())
    except (OSError, SyntaxError, ValueError):
        return 1
    for node in tree.body:
        targets = node.targets if isinstance(node, ast.Assign) else [node]
        for target in targets:
            if name in (getattr(target, "name", None), getattr(target, "id", None)):
                return node.lineno
    return 1


def _told(error: BaseException) -> str:
    """Kind and message of an exception."""
    try:
        message = str(error)
    except RAISED:
        message = ""
    return type(error).__name__ + (f": {message}" if message else "")


def _an(value: Any) -> str:
    """What kind of thing a value is."""
    return f"of type {type(value).__name__}"


def _fault(file: str, line: int, what: str) -> InputError:
    return InputError([Fault(file, f"line {line}", what)])
