"""Records with known truth: a simulated circuit, the instruments in front of the recorder, and the file.

The public face. What it names is imported when it is first asked for, so that a worker process can be set
up before numpy is loaded.
"""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from analyzer.forge.campaign import CampaignRecord, forge_campaign
    from analyzer.forge.errors import ForgeError
    from analyzer.forge.record import ForgedRecord, forge_record, write_forged
    from analyzer.forge.scenario import Scenario
    from analyzer.forge.scenario_file import ScenarioFile, parse_scenario, read_scenario
    from analyzer.forge.truth_document import TruthDocument

__all__ = [
    "CampaignRecord",
    "ForgeError",
    "ForgedRecord",
    "Scenario",
    "ScenarioFile",
    "TruthDocument",
    "forge_campaign",
    "forge_record",
    "parse_scenario",
    "read_scenario",
    "write_forged",
]

_HOMES = {
    "CampaignRecord": "campaign",
    "ForgeError": "errors",
    "ForgedRecord": "record",
    "Scenario": "scenario",
    "ScenarioFile": "scenario_file",
    "TruthDocument": "truth_document",
    "forge_campaign": "campaign",
    "forge_record": "record",
    "parse_scenario": "scenario_file",
    "read_scenario": "scenario_file",
    "write_forged": "record",
}


def __getattr__(name: str) -> Any:
    home = _HOMES.get(name)
    if home is None:
        raise AttributeError(f"module {__name__!r} has no attribute {name!r}")
    from importlib import import_module

    value = getattr(import_module(f"{__name__}.{home}"), name)
    globals()[name] = value
    return value


def __dir__() -> list[str]:
    return sorted({*globals(), *__all__})
