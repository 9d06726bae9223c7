"""Frozen, slotted dataclasses that cost next to nothing until they are used.

``dataclasses.dataclass`` writes and compiles eight methods for each class as its module is
imported; with some two hundred classes that was a fifth of a cold ``tauledger report``, and half of
what it costs beyond the bare imports (tests/benchmarks/start.py). Here the methods are shared by
all classes, and ``__init__`` alone is compiled, at the first instance. Everything else is as there:
``dataclasses.fields``, ``replace`` and ``asdict`` take these classes, they compare, hash, print and
pickle alike, and type checkers are shown the decorator of the standard library. What is not done
here is refused as a class is made: methods of its own in place of the shared ones,
``__post_init__``, ``ClassVar`` and its like, and any option of ``field`` but ``default_factory``.
"""

from __future__ import annotations

import dataclasses
import re
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    import inspect
    from dataclasses import dataclass as dataclass
else:

    def dataclass(*, frozen=False, slots=False, eq=True):
        """Decorate a class; any but a frozen, slotted one goes to the standard library."""
        if frozen and slots and eq:
            return _record
        return dataclasses.dataclass(frozen=frozen, slots=slots, eq=eq)


def _record(cls: type) -> type:
    defaults: dict[str, Any] = {}
    kinds: dict[str, Any] = {}
    for base in cls.__mro__[-1:0:-1]:
        if plan := base.__dict__.get("__record_plan__"):
            kinds.update(plan.kinds)
            defaults.update(plan.defaults)
        elif "__dataclass_fields__" in base.__dict__:
            raise TypeError(f"{cls.__name__}: {base.__name__} is a dataclass of another make")
    inherited = frozenset(kinds)
    namespace = {k: v for k, v in cls.__dict__.items() if k not in ("__dict__", "__weakref__")}
    if unlike := _UNLIKE.intersection(namespace):
        raise TypeError(f"{cls.__name__}: {min(unlike)} is not for a record")
    for name, kind in cls.__annotations__.items():
        kinds[name] = kind
        if name in namespace:
            defaults[name] = namespace.pop(name)
        _refuse_unlike(cls.__name__, name, kind, defaults)
    own = [name for name in cls.__annotations__ if name not in inherited]
    namespace.update(_SHARED)
    namespace.update(
        __slots__=tuple(own),
        __match_args__=tuple(kinds),
        __record_plan__=_Plan(kinds, defaults),
    )
    record = type(cls)(cls.__name__, cls.__bases__, namespace)
    record.__qualname__ = cls.__qualname__
    return record


def _refuse_unlike(owner: str, name: str, kind: Any, defaults: dict[str, Any]) -> None:
    """Raise TypeError for a field the standard library would treat in a way of its own."""
    default = defaults.get(name)
    if re.match(r"(\w+\.)?(ClassVar|InitVar|KW_ONLY)\b", str(kind)):
        raise TypeError(f"{owner}.{name}: {kind} is not for a record")
    if defaults and name not in defaults:
        raise TypeError(f"{owner}.{name} without a default follows one with a default")
    if isinstance(default, dataclasses.Field):
        plain = dataclasses.field(default_factory=default.default_factory)
        if any(getattr(default, key) != getattr(plain, key) for key in _OPTIONS):
            raise TypeError(f"{owner}.{name}: of field() only default_factory is for a record")
    elif type(default).__hash__ is None:
        raise TypeError(f"{owner}.{name}: a default all instances share must not be mutable")


_OPTIONS = ("default", "init", "repr", "hash", "compare", "metadata", "kw_only")


class _Plan:
    """Names with their annotations, and the defaults of those that have one."""

    def __init__(self, kinds: dict[str, Any], defaults: dict[str, Any]) -> None:
        self.kinds, self.defaults = kinds, defaults

    def twin(self, name: str) -> Any:
        """A class with the same fields, made by the standard library."""
        stated = [
            (name, kind, self._field(name)) if name in self.defaults else (name, kind)
            for name, kind in self.kinds.items()
        ]
        return dataclasses.make_dataclass(name, stated, frozen=True)

    def _field(self, name: str) -> Any:
        default = self.defaults[name]
        if isinstance(default, dataclasses.Field):
            return dataclasses.field(default_factory=default.default_factory)
        return dataclasses.field(default=default)


class _Late:
    """An attribute of the standard library's classes, until someone asks for it."""

    def __init__(self, name: str) -> None:
        self._name = name

    def __get__(self, instance: object, owner: Any) -> Any:
        value = getattr(owner.__record_plan__.twin(owner.__name__), self._name)
        setattr(owner, self._name, value)
        return value


class _Signature:
    """What ``help()`` shows of the class, whether or not it has an instance yet."""

    def __get__(self, instance: object, owner: Any) -> inspect.Signature:
        import inspect

        return inspect.signature(owner.__record_plan__.twin(owner.__name__))


def _compile_init(cls: type, plan: _Plan) -> Any:
    """``__init__`` that writes each slot through its own descriptor, which is the fastest way."""
    known: dict[str, Any] = {"_absent": dataclasses.MISSING}
    heads, lines = ["self"], []
    for name in plan.kinds:
        known[f"_set_{name}"] = getattr(cls, name).__set__
        value = name
        if name not in plan.defaults:
            heads.append(name)
        else:
            default = plan.defaults[name]
            known[f"_default_{name}"] = default
            heads.append(f"{name}=_default_{name}")
            if isinstance(default, dataclasses.Field):
                known[f"_make_{name}"] = default.default_factory
                value = f"_make_{name}() if {name} is _default_{name} else {name}"
        lines.append(f" _set_{name}(self, {value})")
    exec(f"def __init__({', '.join(heads)}):\n" + "\n".join(lines or [" pass"]), known)
    made = known["__init__"]
    made.__qualname__ = f"{cls.__qualname__}.__init__"
    return made


def _first_init(self: Any, *given: Any, **named: Any) -> None:
    # A subclass that is no record may have an __init__ of its own, which has called this one.
    cls: Any = next(c for c in type(self).__mro__ if "__record_plan__" in c.__dict__)
    cls.__init__ = _compile_init(cls, cls.__record_plan__)
    cls.__init__(self, *given, **named)


def _values(self: Any) -> tuple[Any, ...]:
    return tuple([getattr(self, name) for name in self.__match_args__])


def _equal(self: object, other: object) -> Any:
    if other.__class__ is not self.__class__:
        return NotImplemented
    return _values(self) == _values(other)


def _hash(self: Any) -> int:
    return hash(_values(self))


def _represent(self: Any) -> str:
    inside = ", ".join([f"{name}={getattr(self, name)!r}" for name in self.__match_args__])
    return f"{type(self).__qualname__}({inside})"


def _refuse_set(self: Any, name: str, value: object) -> None:
    raise dataclasses.FrozenInstanceError(f"cannot assign to field {name!r}")


def _refuse_delete(self: Any, name: str) -> None:
    raise dataclasses.FrozenInstanceError(f"cannot delete field {name!r}")


def _restore(self: Any, state: tuple[Any, ...]) -> None:
    for name, value in zip(self.__match_args__, state, strict=True):
        object.__setattr__(self, name, value)


_SHARED = {
    "__dataclass_fields__": _Late("__dataclass_fields__"),
    "__dataclass_params__": _Late("__dataclass_params__"),
    "__signature__": _Signature(),
    "__init__": _first_init,
    "__eq__": _equal,
    "__hash__": _hash,
    "__repr__": _represent,
    "__setattr__": _refuse_set,
    "__delattr__": _refuse_delete,
    "__getstate__": _values,
    "__setstate__": _restore,
}
_UNLIKE = frozenset((*_SHARED, "__post_init__"))
