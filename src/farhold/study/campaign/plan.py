"""What was asked of a study and on which machine, as it stands in ``study.json``."""

from __future__ import annotations

import json
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from functools import lru_cache
from importlib.metadata import version
from typing import Any

from farhold.errors import Fault
from farhold.files import canonical_json, digest_of
from farhold.study.campaign.declaration import Campaign

__all__ = ["Plan", "differences", "machine", "machine_faults", "plan_of"]

SCHEMA = 1
_PACKAGES = ("farhold", "numpy", "scipy", "numba", "llvmlite")
_ABSENT: Any = object()


@lru_cache(maxsize=1)
def _machine() -> tuple[tuple[str, str], ...]:
    import llvmlite.binding as llvm

    features = sorted(name for name, here in dict(llvm.get_host_cpu_features()).items() if here)
    packages = ((name, version(name)) for name in _PACKAGES)
    return (*packages, ("cpu", str(llvm.get_host_cpu_name())), ("cpu_features", " ".join(features)))


def machine() -> dict[str, str]:
    """Give what decides the last bit here: versions, the processor's kind and its instruction sets."""
    return dict(_machine())


@dataclass(frozen=True, slots=True)
class Plan:
    """What a study was asked.

    Attributes
    ----------
    study, inputs, seed, chunks : as in the campaign
    machine : what decided the last bit where it was begun
    words : the command line without the folder and without what only says how to go about it
    """

    study: str
    inputs: dict[str, Any]
    seed: int
    chunks: int
    machine: dict[str, str]
    words: tuple[str, ...] = ()

    @property
    def digest(self) -> str:
        """Digest of what decides the result; the machine and the words are left out."""
        return digest_of(self._asked())

    def _asked(self) -> dict[str, Any]:
        return {"study": self.study, "inputs": self.inputs, "seed": self.seed, "chunks": self.chunks}

    def to_bytes(self) -> bytes:
        """Write the document."""
        document = {
            "kind": "plan",
            "schema": SCHEMA,
            **self._asked(),
            "machine": self.machine,
            "words": list(self.words),
        }
        document["digest"] = digest_of(document)
        return (json.dumps(document, indent=1, allow_nan=False, ensure_ascii=False) + "\n").encode()

    @classmethod
    def from_bytes(cls, data: bytes) -> Plan | None:
        """Read the document; None where it is none, or was changed."""
        try:
            document = json.loads(data)
            if document.pop("digest") != digest_of(document) or document["kind"] != "plan":
                return None
            if document["schema"] != SCHEMA:
                return None
            study, inputs, here = document["study"], document["inputs"], document["machine"]
            return cls(study, inputs, document["seed"], document["chunks"], here, tuple(document["words"]))
        except (ValueError, KeyError, TypeError, AttributeError):
            return None


def plan_of(campaign: Campaign[Any], words: Sequence[str]) -> Plan:
    """Make the plan of a campaign on this machine; its inputs as JSON gives them back."""
    inputs = json.loads(canonical_json(dict(campaign.inputs)))
    return Plan(campaign.study, inputs, int(campaign.seed), int(campaign.chunks), machine(), tuple(words))


def _leaves(value: Any, path: str = "") -> Iterator[tuple[str, Any]]:
    if isinstance(value, Mapping) and value:
        for key in value:
            yield from _leaves(value[key], f"{path}.{key}" if path else str(key))
    else:
        yield path, value


def _said(value: Any) -> str:
    if value is _ABSENT:
        return "nothing"
    text = repr(value)
    return text if len(text) <= 70 else f"{text[:60]}... ({len(text)} letters)"


def differences(old: Plan, new: Plan) -> list[Fault]:
    """Say what is asked now that was not asked when the study was begun, key by key."""
    before = {"study": old.study, **dict(_leaves(old.inputs)), "seed": old.seed, "chunks": old.chunks}
    now = {"study": new.study, **dict(_leaves(new.inputs)), "seed": new.seed, "chunks": new.chunks}
    return [
        Fault(key, f"the study was begun with {_said(was)}, now {_said(asked)} is asked")
        for key in dict.fromkeys((*before, *now))
        if (was := before.get(key, _ABSENT)) != (asked := now.get(key, _ABSENT))
    ]


def machine_faults(old: Mapping[str, str], new: Mapping[str, str], who: str) -> list[Fault]:
    """Say in what `who` differs from the machine that a study was begun on."""
    faults = []
    for key in sorted(old.keys() | new.keys()):
        was, here = old.get(key, "nothing"), new.get(key, "nothing")
        if was == here:
            continue
        if key == "cpu_features":
            lacks, has = set(was.split()) - set(here.split()), set(here.split()) - set(was.split())
            said = [f"lacks {' '.join(sorted(lacks))}"] if lacks else []
            said += [f"has besides {' '.join(sorted(has))}"] if has else []
            what = f"{who} {' and '.join(said)}"
        else:
            what = f"{who} has {here}, the study was begun with {was}"
        faults.append(
            Fault(
                f"machine.{key}",
                what,
                hint="the bits may differ; --allow-mixed goes on, equal to tolerance only",
            )
        )
    return faults
