"""Load loss carried from one winding temperature to another."""

from __future__ import annotations

from typing import Any

from ..standards import source


@source("IEC 60076-1:2011", "Annex E; IEEE C57.12.90, 9.4", "from memory")
def stray_loss(p_k: Any, p_hv: Any, p_lv: Any) -> Any:
    """Stray loss at the test's temperature [W]: load loss less the I²R loss of both sides."""
    return p_k - (p_hv + p_lv)


@source("IEC 60076-1:2011", "Annex E; IEEE C57.12.90, 9.4", "from memory")
def ohmic_loss_at_temperature(p: Any, t: Any, t_new: Any, k: Any) -> Any:
    """I²R loss of one side [W] carried from `t` to `t_new` [°C]: it rises with resistance."""
    return p * (k + t_new) / (k + t)


@source("IEC 60076-1:2011", "Annex E; IEEE C57.12.90, 9.4", "from memory")
def stray_loss_at_temperature(p: Any, t: Any, t_new: Any, k: Any) -> Any:
    """Stray loss [W] carried from `t` to `t_new` [°C]: it falls as resistance rises."""
    return p * (k + t) / (k + t_new)


@source("IEC 60076-1:2011", "Annex E; IEEE C57.12.90, 9.4", "from memory")
def load_loss(p_hv: Any, p_lv: Any, p_stray: Any) -> Any:
    """Load loss [W]: I²R of both sides and stray, all at one temperature."""
    return p_hv + p_lv + p_stray
