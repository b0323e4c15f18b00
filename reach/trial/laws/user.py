"""A law from the user's own file: its class loaded, its answers checked, what it raises told with the line."""

from __future__ import annotations

import ast
import sys
from collections.abc import Iterator, Mapping
from contextlib import AbstractContextManager, redirect_stdout
from hashlib import sha256
from importlib.machinery import SourceFileLoader
from importlib.util import module_from_spec, spec_from_file_location
from inspect import getattr_static
from math import inf, isfinite
from os.path import basename
from types import CodeType, FunctionType, ModuleType, TracebackType
from typing import Any

import numpy as np

from reach.errors import Fault, InputError, nearest
from reach.trial.laws.base import Seen, Setup, Twist

MODULE = "_reach_user_law"  # what a user's file is called among the modules; the last one loaded has the name
PARTS = 6
TAKEN = (tuple, list, np.ndarray)
SHOWN = 200  # characters of an answer
MOST = (
    1000.0  # m/s and rad/s: some hundred times what arms do; far beyond, its square is too much for a solver
)
RAISED = (Exception, SystemExit)  # whatever a user's code ends with, short of a key pressed

_loaded: dict[tuple[str, bytes], ModuleType] = {}  # of this process, by file and digest of its bytes


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
    """Compiles the bytes that were read, once: no compiled copy is taken from beside the file or left there."""

    source: bytes

    def get_code(self, fullname: str) -> CodeType:
        """The code of these bytes."""
        code: CodeType = self.source_to_code(self.source, self.path)
        return code


def aside() -> AbstractContextManager[object]:
    """Standard output goes to standard error meanwhile: what a user's code prints is no part of an answer."""
    return redirect_stdout(sys.stderr)


def load(file: str, name: str) -> type:
    """The class of a name from a user's file.

    The file runs with all that the user may do. Whether it may run at all is decided by the caller before; nothing here
    asks. It runs once a process for as long as its bytes stay the same. The class need not derive from `Law`: it has
    `__init__(self, setup)`, `twist(self, seen)` and, where it has gains, a dict `gains`.

    Raises
    ------
    InputError
        The file can't be read or fails while it is loaded, or has no such class.
    """
    module = _module(file)
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


def _module(file: str) -> ModuleType:
    """The module of a file as it stands."""
    loader = _Source(MODULE, file)
    spec = spec_from_file_location(MODULE, file, loader=loader)
    if spec is None:
        raise _fault(file, 1, "can't be loaded as Python")
    try:
        loader.source = loader.get_data(file)
        key = file, sha256(loader.source).digest()
        module = _loaded.get(key) or module_from_spec(spec)
        sys.modules[MODULE] = module
        if key not in _loaded:
            with aside():
                loader.exec_module(module)
            _loaded[key] = module
    except RAISED as error:
        sys.modules.pop(MODULE, None)
        raise _fault(file, _line(error, file) or 1, f"fails while it is loaded: {_told(error)}") from error
    return module


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
        with aside():
            return cls(setup)
    except RAISED as error:
        raise _law_fault(cls, error) from error


def asked(law: Any, seen: Seen) -> Twist:
    """The twist that a law answers, six finite numbers of at most MOST; LawFault for anything else.

    Tuples, lists and arrays are taken.
    """
    try:
        answer = law.twist(seen)
    except RAISED as error:
        raise _law_fault(type(law), error) from error
    try:
        if isinstance(answer, TAKEN):
            vx, vy, vz, wx, wy, wz = answer.tolist() if isinstance(answer, np.ndarray) else answer
            most, least = MOST, -MOST  # neither nan nor what is no real number lies between
            straight = least <= vx <= most and least <= vy <= most and least <= vz <= most
            if straight and least <= wx <= most and least <= wy <= most and least <= wz <= most:
                return float(vx), float(vy), float(vz), float(wx), float(wy), float(wz)
    except RAISED:
        pass
    raise _wrong(type(law), answer)


def _wrong(cls: type, answer: Any) -> LawFault:
    """What is wrong with an answer; its line is that of the method."""
    file, line = _home(cls)
    plain, within = type(answer) in (tuple, list, np.ndarray, type(None)), ""
    try:
        shown = repr(answer)[:SHOWN] if plain else _an(answer)
        shape = np.shape(answer) if plain else ()
        if shape == (PARTS,) and all(
            isinstance(part, int | float | np.integer | np.floating) and -inf < part < inf for part in answer
        ):
            within = f" within ±{MOST:g} m/s and rad/s"
    except RAISED:
        shown, shape = _an(answer), (PARTS,)
    if shape not in ((), (PARTS,)):
        shown += f" of shape {shape}"
    text = f"twist must be six finite numbers{within}, got {shown}"
    return LawFault(f"{text} ({basename(file)} line {line})" if line else text, line)


def _law_fault(cls: type, error: BaseException) -> LawFault:
    """What a law raised, with the innermost line of its file; that of a base where its own has no part in it."""
    for file in _files(cls):
        line = _line(error, file)
        if line:
            return LawFault(f"{_told(error)} ({basename(file)} line {line})", line)
    return LawFault(_told(error), 0)


def _files(cls: type) -> Iterator[str]:
    """Files that a class, and then its bases, have their methods from."""
    for base in cls.__mro__:
        for value in vars(base).values():
            method = value.__func__ if isinstance(value, classmethod | staticmethod) else value
            if isinstance(method, FunctionType):
                yield method.__code__.co_filename


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
