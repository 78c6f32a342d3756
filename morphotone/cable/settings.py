"""The keys of an assumptions file: table, name, unit, meaning, reason of the default."""

from collections.abc import Sequence
from dataclasses import dataclass, fields
from typing import Any

from morphotone.cable.kinds import Ascending, Kind, Number, Triple, Word, nearest, shown
from morphotone.errors import AssumptionError
from morphotone.reading.soma import SOMA_RULES
from morphotone.reading.thresholds import Thresholds


@dataclass(frozen=True)
class Setting:
    """One key of the file and the field it fills.

    Attributes
    ----------
    table, key : str
        Where it stands in the file: ``[table] key = …``.
    field : str
        The attribute of ``Assumptions`` (of ``Membrane`` for the membrane table).
    kind : Kind
        What it accepts.
    meaning : str
        One phrase for the commented file.
    reason : str
        Why the default is what it is.
    optional : bool
        Whether the field may be None (the key then does not stand in the file).
    """

    table: str
    key: str
    field: str
    kind: Kind
    meaning: str
    reason: str = ""
    optional: bool = False

    @property
    def label(self) -> str:
        """Name of the setting in a sentence, for whoever sets it from Python."""
        return self.field if self.field == self.key else f"{self.field} ([{self.table}] {self.key})"


def _positive(unit: str, example: float) -> Number:
    return Number(unit, above=0.0, example=example)


def _membrane(key: str, kind: Kind, meaning: str, reason: str) -> Setting:
    return Setting("membrane", key, key, kind, meaning, reason)


MEMBRANE = (
    _membrane(
        "R_m_ohm_cm2",
        _positive("ohm cm2", 20000.0),
        "specific membrane resistance R_m, ohm cm2",
        "near the 23600 of guinea-pig CA3 pyramidal cells (10.1007/BF00736038) and inside the 7000 to "
        "35000 of cat motoneurone dendrites (Clements & Redman 1989 J Physiol 409:63-87)",
    ),
    _membrane(
        "R_i_ohm_cm",
        _positive("ohm cm", 150.0),
        "axial (cytoplasmic) resistivity R_i, ohm cm",
        "inside the 140 to 170 of rat L2/3 pyramidal cells at 36 C "
        "(Trevelyan & Jack 2002 J Physiol 539:623-636)",
    ),
    _membrane(
        "C_m_uF_cm2",
        _positive("uF/cm2", 1.0),
        "specific membrane capacitance C_m, uF/cm2; no effect at 0 Hz",
        "the rule of thumb (Stein 1990, Channels, Carriers and Pumps p. 313); nucleated patches gave 0.9 "
        "(Gentet, Stuart & Clements 2000 Biophys J 79:314-320)",
    ),
    _membrane(
        "spine_factor",
        Number(least=1.0, example=1.5),
        "membrane of spines that were not traced, F = (shaft + spines)/shaft area; used as R_m/F and C_m F; "
        "given here it holds for soma and axon too unless their own tables say 1.0",
        "no spines but those traced",
    ),
)

LAYOUT = (
    Setting(
        "geometry",
        "unit_um",
        "unit_um",
        _positive("um", 1.0),
        "micrometres that one unit of the file stands for",
        "the SWC standard's unit is the micrometre",
    ),
    Setting(
        "geometry",
        "shrinkage",
        "shrinkage",
        Triple(_positive("", 1.0)),
        "factors that x, y and z coordinates are multiplied with to undo shrinkage; diameters stay",
        "no correction, or one already made in the file",
    ),
    Setting(
        "geometry",
        "diameter_factor",
        "diameter_factor",
        _positive("", 1.0),
        "factor that diameters are multiplied with",
        "diameters as traced",
    ),
    Setting(
        "geometry",
        "diameter_offset_um",
        "diameter_offset_um",
        Number("um", example=0.0),
        "added to diameters after the factor, um; may be negative",
        "diameters as traced",
    ),
    Setting(
        "geometry",
        "branch_start",
        "branch_start",
        Word(("parent radius", "own radius")),
        'the first frustum of a daughter at a branch point: "parent radius" tapers from the parent sample\'s '
        'radius, "own radius" is a cylinder of the daughter\'s own',
        "the literal reading of an SWC file",
    ),
    Setting(
        "soma",
        "rule",
        "soma_rule",
        Word(SOMA_RULES),
        "how type-1 samples become one area: " + ", ".join(f'"{rule}"' for rule in SOMA_RULES),
        "chosen per file from its samples, and recorded",
    ),
    Setting(
        "soma",
        "shunt_nS",
        "soma_shunt_nS",
        Number("nS", least=0.0, example=5.0),
        "leak at the soma (or root sample) beside its membrane's, such as an electrode's, nS",
        "an undamaged soma",
    ),
    Setting(
        "axon",
        "treatment",
        "axon",
        Word(("kept", "left out", "cut")),
        'what is done with samples of type 2: "kept", "left out" or "cut" at a length',
        "the file as it is",
    ),
    Setting(
        "axon",
        "cut_um",
        "axon_cut_um",
        Number("um", least=0.0, example=60.0),
        'with "cut" only, and required then: path length kept, from where the axon starts, um',
        optional=True,
    ),
    Setting(
        "orphans",
        "treatment",
        "orphans",
        Word(("left out", "joined", "refused")),
        'what is done with pieces not connected to the soma: "left out", "joined" across a gap, or the file '
        '"refused"',
        "no connection is invented; the pieces are counted and their cable length given",
    ),
    Setting(
        "orphans",
        "gap_um",
        "orphan_gap_um",
        Number("um", least=0.0, example=5.0),
        'with "joined" only, and required then: widest gap that is bridged, um',
        optional=True,
    ),
    Setting(
        "frequencies",
        "hz",
        "hz",
        Ascending(_positive("Hz", 100.0)),
        "frequencies besides 0 Hz, which is always computed, Hz",
        "0 Hz alone",
    ),
)

# A threshold's metadata hold its reason; a length says so in its name.
VETTING = tuple(
    Setting(
        "vetting",
        entry.name,
        entry.name,
        Number(
            "um" if entry.name.endswith("_um") else "",
            least=0.0,
            example=getattr(Thresholds(), entry.name),
            whole=isinstance(getattr(Thresholds(), entry.name), int),
        ),
        "limit of the vetting" + (", um" if entry.name.endswith("_um") else ""),
        entry.metadata["reason"],
    )
    for entry in fields(Thresholds)
)

TABLES = tuple(dict.fromkeys(setting.table for setting in (*MEMBRANE, *LAYOUT, *VETTING)))


def settled(struct: object, settings: Sequence[Setting]) -> dict[str, Any]:
    """Return a struct's fields in their settled types, by name; raise AssumptionError for an unusable one."""
    values = ((setting, getattr(struct, setting.field)) for setting in settings)
    return {
        setting.field: None
        if value is None and setting.optional
        else setting.kind.accept(value, setting.label)
        for setting, value in values
    }


def stem(key: str) -> str:
    """Return a key without its unit: ``R_m_ohm_cm2`` gives ``R_m``."""
    for ending in ("_ohm_cm2", "_ohm_cm", "_uF_cm2", "_um", "_nS"):
        if key.endswith(ending):
            return key.removesuffix(ending)
    return key


def refuse_key(table: str, key: str, value: object, settings: Sequence[Setting]) -> AssumptionError:
    """Return the error for a key that its table does not have.

    Parameters
    ----------
    table, key : str
        Where it was found; the table is empty at the top of the file.
    value : object
        What it was set to.
    settings : sequence of Setting
        The keys the table has; empty at the top of the file.
    """
    where = f"[{table}] {key}" if table else key
    return AssumptionError(f"{where} = {shown(value)}: there is no such key{_way_out(table, key, settings)}.")


def _way_out(table: str, key: str, settings: Sequence[Setting]) -> str:
    """Return the rest of the refusal: the key that was most likely meant."""
    for setting in settings:
        if _same_quantity(key, setting.key):
            unit = f" in {setting.kind.unit}" if isinstance(setting.kind, Number) else ""
            return f"; expected {setting.key}, so give the value{unit} and write the key exactly so"
    home = _home(table, key)
    if home:
        return f" here; expected it as {home}"
    if not settings:
        return " outside the tables; expected it below one of " + ", ".join(f"[{name}]" for name in TABLES)
    keys = [setting.key for setting in settings]
    return nearest(key, keys) or f"; expected {', '.join(keys)}"


def _same_quantity(key: str, name: str) -> bool:
    """Say whether ``key`` is ``name`` with another unit, no unit, other letters' case or no underscore."""
    root, tried = stem(name).lower(), key.lower()
    return (
        tried == root
        or tried == name.lower()
        or (root != name.lower() and tried.startswith(f"{root}_"))
        or tried == root.replace("_", "")
    )


def _home(table: str, key: str) -> str:
    """Return table and key where a key, or a field by that name, belongs; nothing if nowhere."""
    for setting in (*MEMBRANE, *LAYOUT, *VETTING):
        if key in (setting.key, setting.field) and (setting.table, setting.key) != (table, key):
            return f"{setting.key} in [{setting.table}]"
    return ""
