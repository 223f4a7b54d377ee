"""Settings that decide numbers, findings or rights; they live in the bank and every revision keeps those it was saved under."""

from typing import Any

from flask_openapi import APIBlueprint, Tag

from ..bank_access import reading, writing
from ..services import services
from .models import SettingsChange

blueprint = APIBlueprint("settings", __name__, url_prefix="/api/settings", abp_tags=[Tag(name="settings")])


def _shown(bank: Any) -> dict[str, Any]:
    from curvebank import checks

    limits = {name: {"default": x.value, "unit": x.unit, "source": x.source, "meaning": x.meaning} for name, x in checks.LIMITS.items()}
    return {"settings": bank.settings(), "limits": limits}


@blueprint.get("")
def read() -> dict[str, Any]:
    """The settings in force, and every limit of the checks with its default, unit and source."""
    with reading(services().bank) as bank:
        return _shown(bank)


@blueprint.put("")
def change(body: SettingsChange) -> dict[str, Any]:
    """Change settings; the last value of a name counts, older ones stay in the history."""
    from curvebank import checks

    checks.resolve(body.settings)
    with writing(services().bank) as bank:
        bank.set_settings(body.settings, who=body.who)
        return _shown(bank)
