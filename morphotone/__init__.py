"""Electrotonic structure of whole folders of reconstructed neurons.

The floors, top to bottom as data flows: ``reading`` (bytes to reconstruction to findings), ``cable``
(reconstruction and assumptions to electrotonus), ``questions`` (tables), ``night`` (many files, unattended),
``showing`` (text people read), ``commands``. What a script needs stands here, and is imported when asked for:

>>> import morphotone
>>> rec = morphotone.read("sample_morphologies/spar_01.swc")          # doctest: +SKIP
>>> morphotone.solve(rec, hz=[100]).attenuation_to_soma               # doctest: +SKIP
"""

from importlib import import_module
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from morphotone.cable.assumptions import Assumptions, Membrane
    from morphotone.cable.delays import Delays, delays
    from morphotone.cable.electrotonus import Electrotonus, solve
    from morphotone.cable.modes import Modes, amplitudes_by_node, time_constants
    from morphotone.cable.response import FrequencyResponse, frequency_response, half_power_hz
    from morphotone.cable.synaptic import SynapticCurrent
    from morphotone.cable.transients import Transients, potentials, transients
    from morphotone.cable.tree import Cable, build
    from morphotone.commands.map import Maps, draw_map, draw_maps
    from morphotone.commands.rank import rank
    from morphotone.commands.report import Report, report
    from morphotone.commands.survey import Survey, survey
    from morphotone.commands.tabulate import Tabulated, tabulate
    from morphotone.commands.vet import vet
    from morphotone.errors import AssumptionError, MorphotoneError, ReadingError, ResultsError
    from morphotone.questions.collected import Ranking
    from morphotone.reading.reconstruction import Reconstruction, read
    from morphotone.showing.map_files import MapRequest
    from morphotone.showing.mesh import area_check, membrane_mesh, mesh_bytes

_HOMES = {
    "Assumptions": "morphotone.cable.assumptions",
    "Membrane": "morphotone.cable.assumptions",
    "Electrotonus": "morphotone.cable.electrotonus",
    "solve": "morphotone.cable.electrotonus",
    "Delays": "morphotone.cable.delays",
    "delays": "morphotone.cable.delays",
    "Modes": "morphotone.cable.modes",
    "amplitudes_by_node": "morphotone.cable.modes",
    "time_constants": "morphotone.cable.modes",
    "FrequencyResponse": "morphotone.cable.response",
    "frequency_response": "morphotone.cable.response",
    "half_power_hz": "morphotone.cable.response",
    "SynapticCurrent": "morphotone.cable.synaptic",
    "Transients": "morphotone.cable.transients",
    "potentials": "morphotone.cable.transients",
    "transients": "morphotone.cable.transients",
    "Cable": "morphotone.cable.tree",
    "build": "morphotone.cable.tree",
    "Ranking": "morphotone.questions.collected",
    "Maps": "morphotone.commands.map",
    "draw_map": "morphotone.commands.map",
    "draw_maps": "morphotone.commands.map",
    "rank": "morphotone.commands.rank",
    "Report": "morphotone.commands.report",
    "report": "morphotone.commands.report",
    "Survey": "morphotone.commands.survey",
    "survey": "morphotone.commands.survey",
    "Tabulated": "morphotone.commands.tabulate",
    "tabulate": "morphotone.commands.tabulate",
    "vet": "morphotone.commands.vet",
    "AssumptionError": "morphotone.errors",
    "MorphotoneError": "morphotone.errors",
    "ReadingError": "morphotone.errors",
    "ResultsError": "morphotone.errors",
    "Reconstruction": "morphotone.reading.reconstruction",
    "read": "morphotone.reading.reconstruction",
    "area_check": "morphotone.showing.mesh",
    "membrane_mesh": "morphotone.showing.mesh",
    "mesh_bytes": "morphotone.showing.mesh",
    "MapRequest": "morphotone.showing.map_files",
}

__all__ = [
    "AssumptionError",
    "Assumptions",
    "Cable",
    "Delays",
    "Electrotonus",
    "FrequencyResponse",
    "MapRequest",
    "Maps",
    "Membrane",
    "Modes",
    "MorphotoneError",
    "Ranking",
    "ReadingError",
    "Reconstruction",
    "Report",
    "ResultsError",
    "Survey",
    "SynapticCurrent",
    "Tabulated",
    "Transients",
    "amplitudes_by_node",
    "area_check",
    "build",
    "delays",
    "draw_map",
    "draw_maps",
    "frequency_response",
    "half_power_hz",
    "membrane_mesh",
    "mesh_bytes",
    "potentials",
    "rank",
    "read",
    "report",
    "solve",
    "survey",
    "tabulate",
    "time_constants",
    "transients",
    "vet",
]


def __getattr__(name: str) -> Any:
    """Import a public name when it is first asked for: ``--help`` must not wait for pandas."""
    if name not in _HOMES:
        raise AttributeError(f"module 'morphotone' has no attribute {name!r}")
    return getattr(import_module(_HOMES[name]), name)
