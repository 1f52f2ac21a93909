"""The terms of a ledger: what is fixed for every node when the book is opened."""

from __future__ import annotations

import dataclasses
import json
from dataclasses import dataclass
from difflib import get_close_matches
from typing import Any

import numpy as np
from numpy.typing import NDArray

from farhold.domain.epoch import Epoch
from farhold.domain.margins import Margins
from farhold.domain.node_class import NodeClass
from farhold.domain.state import SwarmState
from farhold.errors import DomainError, Fault
from farhold.files import canonical_json
from farhold.ledger import schema

__all__ = ["Terms"]

_FLOATS = (
    "dry_mass_kg",
    "loaded_kg",
    "isp_s",
    "attitude_isp_s",
    "attitude_m_s_per_year",
    "leak_kg_per_year",
    "solar_area_m2",
)
_POSITIVE = ("dry_mass_kg", "isp_s", "attitude_isp_s")


@dataclass(frozen=True, slots=True, eq=False)
class Terms:
    """What is fixed at creation, over the n nodes in the order of the case.

    Attributes
    ----------
    title, epoch : of the case
    classes : the node classes in full; `class_index` (n,) points into it
    margins : the margin policy, by which usable propellant and life are judged
    node : (n,) str, unique
    dry_mass_kg, loaded_kg : (n,) mass without propellant, propellant at load [kg]
    isp_s, attitude_isp_s : (n,) effective specific impulse of the main and the attitude thrusters [s]
    attitude_m_s_per_year, leak_kg_per_year : (n,) yearly demands beside holding
    solar_area_m2 : (n,) area that radiation pressure acts on
    """

    title: str
    epoch: Epoch
    classes: tuple[NodeClass, ...]
    margins: Margins
    node: NDArray[np.str_]
    class_index: NDArray[np.int64]
    dry_mass_kg: NDArray[np.float64]
    loaded_kg: NDArray[np.float64]
    isp_s: NDArray[np.float64]
    attitude_isp_s: NDArray[np.float64]
    attitude_m_s_per_year: NDArray[np.float64]
    leak_kg_per_year: NDArray[np.float64]
    solar_area_m2: NDArray[np.float64]

    def __post_init__(self) -> None:
        n = self.node.size
        if n == 0:
            raise DomainError(Fault("ledger terms.node", "no nodes", "at least one node"))
        for name in ("class_index", *_FLOATS):
            values = getattr(self, name)
            if values.shape != (n,):
                raise DomainError(Fault(f"ledger terms.{name}", f"shape {values.shape}", f"shape ({n},)"))
        for name in _FLOATS:
            values = getattr(self, name)
            lawful = np.isfinite(values) & ((values > 0) if name in _POSITIVE else (values >= 0))
            if not lawful.all():
                k = int(np.argmin(lawful))
                least = "above 0" if name in _POSITIVE else "0 or above"
                raise DomainError(
                    Fault(
                        f"ledger terms.{name}",
                        f"node {self.node[k]}: got {float(values[k])!r}",
                        f"a finite number, {least}",
                    )
                )
        names, counts = np.unique(self.node, return_counts=True)
        if names.size != n:
            raise DomainError(
                Fault("ledger terms.node", f"{str(names[counts > 1][0])!r} occurs twice", "unique names")
            )

    @classmethod
    def of(cls, state: SwarmState, *, title: str, epoch: Epoch, margins: Margins) -> Terms:
        """Take the terms from the swarm as it is loaded; `epoch` is the case's."""
        isp_s = np.array([c.effective_isp_s for c in state.classes])
        attitude_isp_s = np.array([c.attitude_isp_s or c.effective_isp_s for c in state.classes])
        return cls(
            title=title,
            epoch=epoch,
            classes=tuple(state.classes),
            margins=margins,
            node=state.node,
            class_index=np.asarray(state.class_index, dtype=np.int64),
            dry_mass_kg=np.asarray(state.dry_mass_kg, dtype=np.float64),
            loaded_kg=np.asarray(state.loaded_kg, dtype=np.float64),
            isp_s=isp_s[state.class_index],
            attitude_isp_s=attitude_isp_s[state.class_index],
            attitude_m_s_per_year=state.per_class("attitude_m_s_per_year"),
            leak_kg_per_year=state.per_class("leak_kg_per_year"),
            solar_area_m2=np.asarray(state.solar_area_m2, dtype=np.float64),
        )

    def __len__(self) -> int:
        return int(self.node.size)

    @property
    def class_name(self) -> NDArray[np.str_]:
        """Class names per node, (n,)."""
        return np.array([c.name for c in self.classes], dtype=np.str_)[self.class_index]

    def index_of(self, nodes: Any, where: str) -> NDArray[np.int64]:
        """Places of named nodes in the order of the terms, (k,).

        Raises
        ------
        DomainError
            A name is not in the ledger.
        """
        wanted = np.asarray(nodes, dtype=np.str_)
        order = np.argsort(self.node)
        at = np.minimum(np.searchsorted(self.node, wanted, sorter=order), len(self) - 1)
        index = np.asarray(order[at], dtype=np.int64)
        wrong = self.node[index] != wanted
        if wrong.any():
            name = str(wanted[wrong][0])
            near = get_close_matches(name, self.node.tolist()[:20000], 1, 0.5)
            hint = f"did you mean {near[0]!r}?" if near else "see the balances for the names"
            raise DomainError(Fault(where, f"no node {name!r} in the ledger", hint=hint))
        return index

    def table(self) -> Any:
        """Give the terms per node as an Arrow table of :data:`farhold.ledger.schema.TERMS`."""
        columns = {name: getattr(self, name) for name in _FLOATS}
        return schema.table_of(schema.TERMS, {"node": self.node, "class": self.class_name, **columns})

    def header(self) -> bytes:
        """Give what is not per node as canonical JSON."""
        return canonical_json(
            {
                "schema": schema.SCHEMA_VERSION,
                "title": self.title,
                "epoch": self.epoch.iso(),
                "margins": dataclasses.asdict(self.margins),
                "classes": [dataclasses.asdict(one) for one in self.classes],
            }
        )

    def digest(self) -> str:
        """Digest of the content: equal terms, equal digest."""
        return schema.content_digest(
            {"header": self.header().decode("utf-8", "surrogatepass"), "terms": self.table()}
        )

    @classmethod
    def read(cls, header: bytes, table: Any) -> Terms:
        """Rebuild terms from :meth:`header` and :meth:`table`.

        Raises
        ------
        DomainError, KeyError, TypeError, ValueError
            The content is damaged; the caller names the file.
        """
        head = json.loads(header)
        classes = tuple(NodeClass(**one) for one in head["classes"])
        place = {one.name: k for k, one in enumerate(classes)}
        return cls(
            title=head["title"],
            epoch=Epoch.from_iso(head["epoch"]),
            classes=classes,
            margins=Margins(**head["margins"]),
            node=np.array(table.column("node").to_pylist(), dtype=np.str_),
            class_index=np.array([place[name] for name in table.column("class").to_pylist()], dtype=np.int64),
            **{name: schema.column(table, name) for name in _FLOATS},
        )
