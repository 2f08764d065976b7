"""The body of a snapshot: everything that is needed to work on without rtid. Stamps are seconds since 1970."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import asdict
from typing import Any

from rtid.identify.structure import Fit, Structure
from rtid.model.reduced import reduced
from rtid.model.validation import Validation
from rtid.report import Quantity

CAUTION = (
    "Advice for a qualified person, not for automatic use. Check the model against the plant before any change, put "
    "the loop into a safe state while retuning, follow the site's rules and local codes. rtid is no safety function."
)


def model_part(structure: Structure, fit: Fit | None, *, output_shift: float) -> dict[str, Any]:
    """transfer, reduced and parameters; all None or empty while there is no model."""
    if fit is None:
        return {"transfer": None, "reduced": None, "parameters": {"names": [], "values": [], "covariance": []}}
    transfers = structure.transfer(fit)
    numerator, denominator, delay = transfers[0]
    rest = fit.delay * structure.period if fit.delay else delay * structure.period
    form = reduced(numerator, denominator, delay=rest + output_shift, period=structure.period)
    parts = [
        {"numerator": n.tolist(), "denominator": d.tolist(), "delay_samples": rows, "period_s": structure.period}
        for n, d, rows in transfers
    ]
    return {
        "transfer": parts[0] if len(parts) == 1 else parts,
        "reduced": asdict(form) if form else None,
        "parameters": {
            "names": list(structure.names), "values": fit.theta.tolist(), "covariance": fit.covariance.tolist(),
        },
    }  # fmt: skip


def validation_part(validation: Validation) -> dict[str, float | None]:
    return asdict(validation)


def change_part(now: Mapping[str, Quantity], before: Mapping[str, Quantity] | None) -> dict[str, float | None]:
    """Change of every known quantity against the baseline, in percent."""
    if before is None:
        return {}
    return {f"{name}_pct": _percent(now[name].value, quantity.value) for name, quantity in before.items()}


def _percent(value: float | None, before: float | None) -> float | None:
    if value is None or before is None or before == 0.0:
        return None
    return 100.0 * (value / before - 1.0)
