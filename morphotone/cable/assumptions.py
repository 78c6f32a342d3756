"""What a run assumes and nobody measured: membrane, geometry, soma, axon, orphans, frequencies, vetting.

The file form is TOML; `settings` lists the keys, `kinds` what each accepts, `ranges` where published values
lie, `commented` how the file is written. Here is the struct, and the way from a file to it and back.
"""

import re
import tomllib
from collections.abc import Iterator, Mapping
from dataclasses import dataclass, field, replace
from functools import cached_property
from numbers import Integral
from typing import Any, Self

from morphotone.cable.commented import commented_toml
from morphotone.cable.kinds import nearest, shown
from morphotone.cable.ranges import PublishedRange, range_of
from morphotone.cable.settings import LAYOUT, MEMBRANE, TABLES, VETTING, Setting, refuse_key, settled
from morphotone.errors import AssumptionError
from morphotone.reading.reconstruction import domain_name
from morphotone.reading.thresholds import Thresholds

# The codes the SWC standard names; every other code goes by type_N.
_CODE_OF = {domain_name(code): code for code in (1, 2, 3, 4)}
_SETTING = {setting.field: setting for setting in LAYOUT}


@dataclass(frozen=True)
class Membrane:
    """Passive constants of one domain.

    Attributes
    ----------
    R_m_ohm_cm2 : float
        Specific membrane resistance, ohm cm2, above 0.
    R_i_ohm_cm : float
        Axial (cytoplasmic) resistivity, ohm cm, above 0.
    C_m_uF_cm2 : float
        Specific membrane capacitance, uF/cm2, above 0.
    spine_factor : float
        F = (shaft + spines)/shaft area, 1 or more: the cable has R_m/F and C_m F (Holmes 1989; Rapp, Yarom &
        Segev 1992: attribution from memory).

    Raises
    ------
    AssumptionError
        When a value is no finite number or breaks its bound.
    """

    R_m_ohm_cm2: float = 20000.0
    R_i_ohm_cm: float = 150.0
    C_m_uF_cm2: float = 1.0
    spine_factor: float = 1.0

    def __post_init__(self) -> None:
        _set(self, settled(self, MEMBRANE))

    def to_dict(self) -> dict[str, float]:
        """Return the constants by key."""
        return {setting.key: getattr(self, setting.field) for setting in MEMBRANE}


@dataclass(frozen=True)
class Assumptions:
    """Every choice a result depends on and the file does not hold.

    Attributes
    ----------
    membrane : Membrane
        Constants of every domain that has none of its own.
    domains : dict of int to Membrane
        Complete constants of the domains that differ from ``membrane``, by SWC code, ascending; one equal to
        ``membrane`` is dropped, so that equal assumptions compare equal.
    unit_um : float
        Micrometres that one unit of the file stands for, above 0.
    shrinkage : tuple of three float
        Factors that x, y, z are multiplied with, above 0.
    diameter_factor, diameter_offset_um : float
        Diameters become ``factor * d + offset``; factor above 0, offset in um.
    branch_start : str
        ``"parent radius"`` or ``"own radius"``: start of a daughter's first frustum at a branch point.
    soma_rule : str
        One of ``SOMA_RULES``.
    soma_shunt_nS : float
        Leak at the soma, or without one at the root sample, beside the membrane's, nS, 0 or more.
    axon : str
        ``"kept"``, ``"left out"`` or ``"cut"``.
    axon_cut_um : float or None
        With ``"cut"`` only: path length kept, from where the axon starts, um.
    orphans : str
        ``"left out"``, ``"joined"`` or ``"refused"``.
    orphan_gap_um : float or None
        With ``"joined"`` only: widest gap bridged, um.
    hz : tuple of float
        Frequencies besides 0 Hz, Hz, above 0, distinct, ascending.
    thresholds : Thresholds
        Limits of the vetting.

    Raises
    ------
    AssumptionError
        When a value cannot be used; the sentence names the key.
    """

    membrane: Membrane = field(default_factory=Membrane)
    domains: dict[int, Membrane] = field(default_factory=dict)
    unit_um: float = 1.0
    shrinkage: tuple[float, float, float] = (1.0, 1.0, 1.0)
    diameter_factor: float = 1.0
    diameter_offset_um: float = 0.0
    branch_start: str = "parent radius"
    soma_rule: str = "auto"
    soma_shunt_nS: float = 0.0
    axon: str = "kept"
    axon_cut_um: float | None = None
    orphans: str = "left out"
    orphan_gap_um: float | None = None
    hz: tuple[float, ...] = ()
    thresholds: Thresholds = field(default_factory=Thresholds)

    def __post_init__(self) -> None:
        _set(self, settled(self, LAYOUT))
        thresholds = replace(self.thresholds, **settled(self.thresholds, VETTING))
        _check_pair(_SETTING["axon_cut_um"], self.axon, "cut", self.axon_cut_um)
        _check_pair(_SETTING["orphan_gap_um"], self.orphans, "joined", self.orphan_gap_um)
        own = {_checked_code(code): membrane for code, membrane in self.domains.items()}
        differing = {code: membrane for code, membrane in sorted(own.items()) if membrane != self.membrane}
        _set(self, {"thresholds": thresholds, "domains": differing})

    def of(self, kind: int) -> Membrane:
        """Return the membrane of a domain, by its SWC code."""
        return self.domains.get(kind, self.membrane)

    @cached_property
    def geometry(self) -> "Assumptions":
        """The same but for what no cable's shape depends on: membrane, frequencies and the soma's shunt."""
        return replace(self, membrane=Membrane(), domains={}, hz=(), soma_shunt_nS=0.0)

    @property
    def warnings(self) -> tuple[str, ...]:
        """One sentence per value outside its published range; empty when there is none."""
        sentences = (published.warning(where, value) for where, value, published in self._ranged())
        return tuple(sentence for sentence in sentences if sentence)

    def _ranged(self) -> Iterator[tuple[str, float, PublishedRange]]:
        """Yield place, value and published range of every value that has a range."""
        for key, value in self.membrane.to_dict().items():
            yield f"[membrane] {key}", value, range_of(key)
        inherited = self.membrane.to_dict()
        for code, membrane in self.domains.items():
            name = table_name(code)
            for key, value in membrane.to_dict().items():
                if value != inherited[key]:
                    yield f"[membrane.{name}] {key}", value, range_of(key, name)
        for axis, value in zip("xyz", self.shrinkage, strict=True):
            published = range_of("shrinkage_z" if axis == "z" else "shrinkage_xy")
            yield f"[geometry] shrinkage, {axis}", value, published
        for name in ("unit_um", "diameter_factor", "diameter_offset_um", "soma_shunt_nS"):
            yield f"[{_SETTING[name].table}] {_SETTING[name].key}", getattr(self, name), range_of(name)
        for value in self.hz:
            yield "[frequencies] hz", value, range_of("hz")

    @classmethod
    def from_toml(cls, text: str) -> Self:
        """Return the assumptions that a file's text states; keys left out keep their defaults.

        Parameters
        ----------
        text : str
            TOML, in the tables of `to_toml`.

        Raises
        ------
        AssumptionError
            When the text is no TOML, or holds an unknown key or an unusable value.
        """
        try:
            tree = tomllib.loads(text)
        except (ValueError, RecursionError) as error:  # tomllib raises either for absurd numbers or nesting
            raise AssumptionError(
                f"the assumptions are not valid TOML: {error}; expected lines such as [membrane], "
                "R_m_ohm_cm2 = 20000.0 or a comment after #, so correct the place named."
            ) from error
        return cls.from_dict(tree)

    @classmethod
    def from_dict(cls, tree: Mapping[str, object]) -> Self:
        """Return the assumptions that nested tables state, as `to_dict` gives them.

        Raises
        ------
        AssumptionError
            When a table or key is unknown or a value unusable.
        """
        tables = {name: _table(name, content) for name, content in tree.items()}
        membrane, domains = _read_membranes(tables.get("membrane", {}))
        thresholds = _read_table("vetting", tables.get("vetting", {}), VETTING)
        others = [
            _read_table(name, content, _settings_of(name))
            for name, content in tables.items()
            if name not in ("membrane", "vetting")
        ]
        fields: dict[str, Any] = {name: value for part in others for name, value in part.items()}
        return cls(membrane=membrane, domains=domains, thresholds=Thresholds(**thresholds), **fields)

    def to_toml(self) -> str:
        """Return a complete, commented file that reads back equal."""
        return commented_toml(self.to_dict(), type(self)().to_dict())

    def to_dict(self) -> dict[str, Any]:
        """Return nested tables, as the file has them, ready for JSON; a key that is not set is left out."""
        tree: dict[str, Any] = {table: {} for table in TABLES}
        tree["membrane"] = self.membrane.to_dict() | {
            table_name(code): membrane.to_dict() for code, membrane in self.domains.items()
        }
        for setting in LAYOUT:
            value = getattr(self, setting.field)
            if value is not None:
                tree[setting.table][setting.key] = list(value) if isinstance(value, tuple) else value
        tree["vetting"] = {setting.key: getattr(self.thresholds, setting.field) for setting in VETTING}
        return tree


def differences(a: Assumptions, b: Assumptions) -> list[str]:
    """Return one phrase per key in which two assumptions differ: dotted key, both values.

    A domain that only one of them sets apart is compared with what holds there in the other.
    """
    codes = sorted({*a.domains, *b.domains})
    left, right = _flat(a, codes), _flat(b, codes)
    keys = [*left, *(key for key in right if key not in left)]
    pairs = ((key, left.get(key, "not set"), right.get(key, "not set")) for key in keys)
    return [f"{key}: {one} against {other}" for key, one, other in pairs if one != other]


def _flat(assumptions: Assumptions, codes: list[int]) -> dict[str, str]:
    """Return shown values by dotted key, with a membrane table for each of the codes."""
    tree = assumptions.to_dict()
    own = {f"membrane.{table_name(code)}": assumptions.of(code).to_dict() for code in codes}
    tables = tree | {"membrane": assumptions.membrane.to_dict()} | own
    return {f"{name}.{key}": shown(value) for name, table in tables.items() for key, value in table.items()}


def table_name(code: int) -> str:
    """Return the name of a domain's table: soma, axon, basal, apical, otherwise type_N."""
    return domain_name(code) if code in _CODE_OF.values() else f"type_{code}"


def _set(struct: object, values: Mapping[str, object]) -> None:
    """Set fields of a frozen struct while it is being made."""
    for name, value in values.items():
        object.__setattr__(struct, name, value)


def _checked_code(code: object) -> int:
    """Return an SWC code as int."""
    if isinstance(code, bool) or not isinstance(code, Integral) or code < 0:
        raise AssumptionError(
            f"domains has the key {shown(code)}: expected an SWC code, 0 or above, such as 2 for the axon."
        )
    return int(code)


def _check_pair(length: Setting, word: str, needs: str, value: float | None) -> None:
    """Refuse a length without the word it belongs to, and the word without its length."""
    key, table = length.key, length.table
    if word == needs and value is None:
        raise AssumptionError(
            f'[{table}] treatment = "{needs}" needs a length: expected {key} in um beside it '
            f"({length.field} from Python)."
        )
    if word != needs and value is not None:
        raise AssumptionError(
            f'[{table}] {key} = {value!r} has no effect with treatment = "{word}": expected it only with '
            f'treatment = "{needs}", so delete {key} ({length.field} from Python) or change the treatment.'
        )


def _table(name: str, content: object) -> dict[str, object]:
    """Return a top-level table, refusing unknown names and keys outside any table."""
    if name in TABLES and isinstance(content, dict):
        return content
    if name in TABLES:
        raise AssumptionError(
            f"{name} = {shown(content)}: expected a table, so write [{name}] and its keys below."
        )
    if isinstance(content, dict):
        expected = ", ".join(f"[{table}]" for table in TABLES)
        raise AssumptionError(f"[{name}] is no table here: expected {expected}{nearest(name, TABLES)}.")
    raise refuse_key("", name, content, ())


def _settings_of(table: str) -> tuple[Setting, ...]:
    return tuple(setting for setting in LAYOUT if setting.table == table)


def _read_table(name: str, content: Mapping[str, object], settings: tuple[Setting, ...]) -> dict[str, Any]:
    """Return settled values by field name."""
    by_key = {setting.key: setting for setting in settings}
    values = {}
    for key, value in content.items():
        if key not in by_key:
            raise refuse_key(name, key, value, settings)
        values[by_key[key].field] = by_key[key].kind.accept(value, f"[{name}] {key}")
    return values


def _read_membranes(content: Mapping[str, object]) -> tuple[Membrane, dict[int, Membrane]]:
    """Return the general membrane and each domain's, completed from the general one."""
    keys = [setting.key for setting in MEMBRANE]
    nested = {name: part for name, part in content.items() if isinstance(part, dict) and name not in keys}
    plain = {key: value for key, value in content.items() if key not in nested}
    general = Membrane(**_read_table("membrane", plain, MEMBRANE))
    domains = {
        _code(name): replace(general, **_read_table(f"membrane.{name}", part, MEMBRANE))
        for name, part in nested.items()
    }
    return general, domains


def _code(name: str) -> int:
    """Return the SWC code of a domain's table."""
    if name in _CODE_OF:
        return _CODE_OF[name]
    numbered = re.fullmatch(r"type_(0|[1-9][0-9]{0,8})", name)
    if numbered is None:
        raise AssumptionError(
            f"[membrane.{name}] is no domain: expected {', '.join(_CODE_OF)} or type_N with N the SWC code, "
            f"such as [membrane.type_7]{nearest(name, _CODE_OF)}."
        )
    code = int(numbered[1])
    if code in _CODE_OF.values():
        raise AssumptionError(
            f"[membrane.{name}] has a name of its own: expected that, so write [membrane.{table_name(code)}]."
        )
    return code
