"""The summary of a run in words and as plain data."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np
from wavekin.records import KINDS

if TYPE_CHECKING:
    from wavekin.history import History


def facts(history: History, words: dict[str, Any] | None = None) -> dict[str, Any]:
    """Return the facts of a history as plain data, ready for JSON."""
    words = words or {}
    law, end = history.law, history.until
    kinds = np.bincount(history.fronts["kind"], minlength=len(KINDS))
    return {
        "title": words.get("title", ""),
        "law": law.name if law is not None else words.get("law_name", ""),
        "formula": law.formula if law is not None else words.get("law_formula", ""),
        "source": law.source if law is not None else words.get("law_source", ""),
        "until": end,
        "domain": "open line" if history.ring is None else f"ring from {history.ring[0]:g} to {history.ring[1]:g}",
        "fronts": len(history.fronts),
        **{f"{kind}_fronts": int(count) for kind, count in zip(KINDS, kinds, strict=False)},
        "alive_at_end": history.front_count(end),
        "collisions": len(history.collisions),
        "levels": len(history.levels),
        "loop": history.run.get("loop", ""),
        "budget": history.run.get("budget"),
        "budget_loops": history.run.get("budget_loops"),
        "l1_bound": history.error_bound(end),
        "cumulative_bound": history.cumulative_bound(end),
        "data_defect": history.initial_defect,
        "mass_start": history.mass(0.0),
        "mass_end": history.mass(end),
        "variation_start": history.total_variation(0.0),
        "variation_end": history.total_variation(end),
        "caution": words.get("caution", ""),
        "case_sha256": words.get("sha256", ""),
    }


def summary(known: dict[str, Any]) -> str:
    """Return facts as lines for people."""
    budget = ""
    if known["budget"] is not None:
        loops = known["budget_loops"]
        budget = f"  (budget {known['budget']:g}, met after {loops} run{'s' if loops != 1 else ''})"
    drift = known["mass_end"] - known["mass_start"]
    kinds = ", ".join(f"{known[f'{kind}_fronts']} {kind}" for kind in KINDS if known.get(f"{kind}_fronts"))
    lines = [
        known["title"],
        f"  law               {known['law']}: {known['formula']}",
        f"                    {known['source']}",
        f"  domain            {known['domain']}, until {known['until']:g}",
        f"  fronts            {known['fronts']} ({kinds or 'none'}); {known['alive_at_end']} alive at the end",
        f"  collisions        {known['collisions']}",
        f"  flux              {known['levels']} breakpoints; {known['loop']} loop",
        f"  proven L1 bound   {known['l1_bound']:.4g}{budget}",
        f"  amounts bound     {known['cumulative_bound']:.4g}  (any amount between two places or past a place)",
        f"  mass              {known['mass_end']:.12g}  (drift {drift:.1g})",
        f"  variation         {known['variation_start']:.6g} at the start, {known['variation_end']:.6g} at the end",
    ]
    if known["caution"]:
        lines.append(f"  caution           {known['caution']}")
    return "\n".join(line for line in lines if line.strip())
