"""Methods by name. Arrays in, arrays out; each is imported when it is first used."""

from collections.abc import Iterator, Mapping
from importlib import import_module
from types import ModuleType

SAMPLED = ("morris", "sobol", "spread")


class _Registry(Mapping[str, ModuleType]):
    names = ("linear", "morris", "sobol", "spread", "worst")

    def __getitem__(self, name: str) -> ModuleType:
        if name not in self.names:
            raise KeyError(name)
        return import_module(f"study.methods.{name}")

    def __iter__(self) -> Iterator[str]:
        return iter(self.names)

    def __len__(self) -> int:
        return len(self.names)


METHODS: Mapping[str, ModuleType] = _Registry()
