"""Balances: what is left per node after a commit, and how long it lasts."""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import NDArray

from farhold.ledger import schema
from farhold.ledger.terms import Terms
from farhold.propellant.life import life_years
from farhold.propellant.margins import usable_kg

__all__ = ["balances_after"]


def balances_after(
    terms: Terms, former: Any | None, entries: Any, roster: Any, demand_m_s_yr: NDArray[np.float64]
) -> Any:
    """Carry the balances over a commit.

    `mass_kg` is the mass after the node's last entry, `spent_kg` the sum of its propellant without the load,
    `margin_kg` the sum of its memos. Life is that at the present demand; lost and retired nodes have none.

    Parameters
    ----------
    terms : Terms
    former : balances before, or None for the opening
    entries, roster : tables of the commit
    demand_m_s_yr : (n,) price of holding the present slot [m/s per year]

    Returns
    -------
    pyarrow.Table of :data:`farhold.ledger.schema.BALANCES`, n rows
    """
    n = len(terms)
    if former is None:
        mass_kg, spent_kg, margin_kg = terms.dry_mass_kg.copy(), np.zeros(n), np.zeros(n)
    else:
        mass_kg, spent_kg, margin_kg = (
            schema.column(former, name).copy() for name in ("mass_kg", "spent_kg", "margin_kg")
        )
    if entries.num_rows:
        index = terms.index_of(schema.column(entries, "node"), "entries")
        is_load = schema.column(entries, "cause") == "load"
        mass_kg[index] = schema.column(entries, "mass_after_kg")
        np.add.at(spent_kg, index, np.where(is_load, 0.0, schema.column(entries, "propellant_kg")))
        np.add.at(margin_kg, index, schema.column(entries, "margin_kg"))
    usable = usable_kg(mass_kg, terms.dry_mass_kg, terms.loaded_kg, terms.isp_s, terms.margins)
    life = life_years(
        mass_kg,
        usable,
        terms.isp_s,
        demand_m_s_yr,
        terms.margins,
        attitude_m_s_yr=terms.attitude_m_s_per_year,
        attitude_isp_s=terms.attitude_isp_s,
        leak_kg_yr=terms.leak_kg_per_year,
    )
    status = schema.column(roster, "status")
    alive = np.isin(status.astype(np.str_), schema.ALIVE)
    return schema.table_of(
        schema.BALANCES,
        {
            "node": terms.node,
            "class": terms.class_name,
            "status": status,
            "formation": schema.column(roster, "formation"),
            "slot": schema.column(roster, "slot"),
            "loaded_kg": terms.loaded_kg,
            "spent_kg": spent_kg,
            "mass_kg": mass_kg,
            "margin_kg": margin_kg,
            "usable_kg": usable,
            "life_years": np.where(alive, life.years, 0.0),
        },
    )
