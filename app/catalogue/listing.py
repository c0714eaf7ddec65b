"""The properties that the tool knows, and the search among them.

Plate and bar (derivable from div j = 0 and curl E = 0). A wide plate fixes the direction of the cause, which is the
field or the gradient: it lies along the normal n. A long bar fixes the direction of the flux: it lies along the length
n. With flux = A · cause, a plate reads nᵀAn (``along``) and a bar 1/(nᵀA⁻¹n) (``rod``). A resistivity answers the flux
with a field, so its bar reads nᵀρn (``along``) and its plate 1/(nᵀρ⁻¹n) (``rod``).
"""

from __future__ import annotations

import difflib
import re
from typing import Final

from app.catalogue.property import Property, SignLimit, Unit
from app.errors import InputError

_NO_LIMIT: Final = "No limit: principal values may be positive, negative or zero, also in one crystal."
_SECOND_LAW: Final = "Positive definite: a flow that ran up its own gradient would destroy entropy."

ONE: Final = Unit("1", "1")
_CONDUCTING: Final = (
    Unit("W/(m*K)", "W/(m·K)"),
    Unit("mW/(cm*K)", "mW/(cm·K)"),
    Unit("W/(cm*K)", "W/(cm·K)"),
    Unit("mW/(m*K)", "mW/(m·K)"),
)
_THERMAL_RESISTING: Final = (Unit("m*K/W", "m·K/W"), Unit("cm*K/W", "cm·K/W"), Unit("cm*K/mW", "cm·K/mW"))
_ELECTRICAL: Final = (
    Unit("S/m", "S/m"),
    Unit("S/cm", "S/cm"),
    Unit("mS/cm", "mS/cm"),
    Unit("MS/m", "MS/m"),
    Unit("1/(ohm*cm)", "1/(Ω·cm)"),
)
_ELECTRICAL_RESISTING: Final = (
    Unit("ohm*m", "Ω·m"),
    Unit("ohm*cm", "Ω·cm"),
    Unit("mohm*cm", "mΩ·cm"),
    Unit("µohm*cm", "µΩ·cm"),
)
_DIFFUSING: Final = (Unit("m^2/s", "m²/s"), Unit("mm^2/s", "mm²/s"), Unit("cm^2/s", "cm²/s"))
_EXPANDING: Final = (Unit("1/K", "1/K"), Unit("1e-6/K", "10⁻⁶/K"), Unit("ppm/K", "ppm/K"))
_SMALL_NUMBERS: Final = (ONE, Unit("1e-6", "10⁻⁶"), Unit("ppm", "ppm"))
_THERMOELECTRIC: Final = (Unit("V/K", "V/K"), Unit("mV/K", "mV/K"), Unit("µV/K", "µV/K"))

PROPERTIES: Final[tuple[Property, ...]] = (
    Property(
        key="thermal_conductivity",
        name="thermal conductivity",
        symbol="κ",
        unit=_CONDUCTING[0],
        units=_CONDUCTING,
        parity="polar",
        intrinsic="symmetric",
        sign_limit=SignLimit("positive definite", _SECOND_LAW, "from memory"),
        inverse="thermal_resistivity",
        plate="along",
        long_bar="rod",
        four_corner="sheet",
        note="Symmetric by Onsager's relations.",
    ),
    Property(
        key="thermal_resistivity",
        name="thermal resistivity",
        symbol="r",
        unit=_THERMAL_RESISTING[0],
        units=_THERMAL_RESISTING,
        parity="polar",
        intrinsic="symmetric",
        sign_limit=SignLimit(
            "positive definite", "Positive definite, as its inverse the thermal conductivity is.", "from memory"
        ),
        inverse="thermal_conductivity",
        plate="rod",
        long_bar="along",
        note="Symmetric by Onsager's relations.",
    ),
    Property(
        key="electrical_conductivity",
        name="electrical conductivity",
        symbol="σ",
        unit=_ELECTRICAL[0],
        units=_ELECTRICAL,
        parity="polar",
        intrinsic="symmetric",
        sign_limit=SignLimit("positive definite", _SECOND_LAW, "from memory"),
        inverse="electrical_resistivity",
        plate="along",
        long_bar="rod",
        four_corner="sheet",
        note="Symmetric by Onsager's relations, without a magnetic field.",
    ),
    Property(
        key="electrical_resistivity",
        name="electrical resistivity",
        symbol="ρ",
        unit=_ELECTRICAL_RESISTING[0],
        units=_ELECTRICAL_RESISTING,
        parity="polar",
        intrinsic="symmetric",
        sign_limit=SignLimit(
            "positive definite", "Positive definite, as its inverse the electrical conductivity is.", "from memory"
        ),
        inverse="electrical_conductivity",
        plate="rod",
        long_bar="along",
        note="Symmetric by Onsager's relations, without a magnetic field.",
    ),
    Property(
        key="diffusivity",
        name="diffusivity",
        symbol="D",
        unit=_DIFFUSING[0],
        units=_DIFFUSING,
        parity="polar",
        intrinsic="symmetric",
        sign_limit=SignLimit(
            "positive definite",
            "Positive definite: an uneven distribution levels out in every direction.",
            "from memory",
        ),
        plate="along",
        long_bar="rod",
        note="Of heat or of matter; a long bar needs sides that let nothing through.",
    ),
    Property(
        key="permittivity",
        name="relative permittivity",
        symbol="ε",
        unit=ONE,
        units=(ONE,),
        parity="polar",
        intrinsic="symmetric",
        sign_limit=SignLimit(
            "positive definite",
            "Positive definite where it is static: a field costs energy. Near a resonance it may be negative.",
            "from memory",
            when="static",
        ),
        inverse="impermeability",
        plate="along",
        note="Relative to the permittivity of vacuum; without losses.",
    ),
    Property(
        key="impermeability",
        name="relative dielectric impermeability",
        symbol="B",
        unit=ONE,
        units=(ONE,),
        parity="polar",
        intrinsic="symmetric",
        sign_limit=SignLimit(
            "positive definite",
            "Positive definite where it is static, as its inverse the permittivity is.",
            "from memory",
            when="static",
        ),
        inverse="permittivity",
        plate="rod",
        note="The inverse of the relative permittivity; its quadric is the indicatrix of optics.",
    ),
    Property(
        key="thermal_expansion",
        name="thermal expansion",
        symbol="α",
        unit=_EXPANDING[0],
        units=_EXPANDING,
        parity="polar",
        intrinsic="symmetric",
        sign_limit=SignLimit("none", f"{_NO_LIMIT} A crystal may shrink along a line on heating.", "common practice"),
        plate="along",
        long_bar="along",
    ),
    Property(
        key="magnetic_susceptibility",
        name="magnetic susceptibility",
        symbol="χ",
        unit=ONE,
        units=_SMALL_NUMBERS,
        parity="polar",
        intrinsic="symmetric",
        sign_limit=SignLimit("none", f"{_NO_LIMIT} Negative is diamagnetic.", "common practice"),
        plate="along",
        long_bar="along",
        note="Of unit volume, in SI; so small that the specimen's own field does not count.",
    ),
    Property(
        key="thermopower",
        name="thermopower",
        symbol="S",
        unit=_THERMOELECTRIC[0],
        units=_THERMOELECTRIC,
        parity="polar",
        intrinsic="general",
        sign_limit=SignLimit("none", _NO_LIMIT, "common practice"),
        plate="along",
        note="A long bar reads nᵀSκ⁻¹n/(nᵀκ⁻¹n), which needs the thermal conductivity κ. Peltier: Π = T Sᵀ.",
    ),
    Property(
        key="peltier",
        name="Peltier coefficient",
        symbol="Π",
        unit=Unit("V", "V"),
        units=(Unit("V", "V"), Unit("mV", "mV")),
        parity="polar",
        intrinsic="general",
        sign_limit=SignLimit("none", _NO_LIMIT, "common practice"),
        long_bar="along",
        note="Heat carried per current: Π = T Sᵀ, S the thermopower. A plate needs the conductivity too.",
    ),
    Property(
        key="gyration",
        name="gyration",
        symbol="g",
        unit=ONE,
        units=(ONE, Unit("1e-4", "10⁻⁴"), Unit("1e-6", "10⁻⁶")),
        parity="axial",
        intrinsic="symmetric",
        sign_limit=SignLimit("none", f"{_NO_LIMIT} The sign is the sense of rotation.", "common practice"),
        plate="along",
        long_bar="along",
        note="Its sign needs the crystal's hand, which Laue pictures cannot give.",
    ),
    Property(
        key="stress",
        name="stress",
        symbol="σ",
        unit=Unit("Pa", "Pa"),
        units=(Unit("Pa", "Pa"), Unit("kPa", "kPa"), Unit("MPa", "MPa"), Unit("GPa", "GPa")),
        parity="polar",
        intrinsic="symmetric",
        sign_limit=SignLimit("none", f"{_NO_LIMIT} Tension is positive.", "common practice"),
        is_field=True,
        note="A field that is put on the crystal: the crystal's symmetry locks none of its cells.",
    ),
    Property(
        key="strain",
        name="strain",
        symbol="ε",
        unit=ONE,
        units=(ONE, Unit("%", "%"), Unit("1e-6", "10⁻⁶")),
        parity="polar",
        intrinsic="symmetric",
        sign_limit=SignLimit("none", f"{_NO_LIMIT} Stretch is positive.", "common practice"),
        is_field=True,
        note="An applied strain: symmetry locks none of its cells. Off the diagonal stand half the shear angles.",
    ),
    Property(
        key="other",
        name="other, my own unit",
        symbol="A",
        unit=ONE,
        units=(),
        parity="polar",
        intrinsic="symmetric",
        sign_limit=SignLimit("none", "Nothing is known of its sign.", "common practice"),
        own_unit=True,
        note="Parity and symmetry by itself are for you to state; the unit is taken as it is written.",
    ),
)

_BY_KEY: Final = {entry.key: entry for entry in PROPERTIES}


def list_properties() -> tuple[Property, ...]:
    """Every property, in the order in which a page lists them."""
    return PROPERTIES


def find_property(key: str) -> Property:
    """The property of that key; capitals, spaces and hyphens do not matter.

    Raises:
        InputError: there is none; the hint gives the nearest keys.
    """
    plain = re.sub(r"[\s\-]+", "_", key.strip().lower())
    if plain in _BY_KEY:
        return _BY_KEY[plain]
    near = difflib.get_close_matches(plain, _BY_KEY, n=3, cutoff=0.5)
    near += [known for known in _BY_KEY if len(plain) > 3 and plain in known and known not in near]
    hint = f"Did you mean {' or '.join(near)}?" if near else f"Known: {', '.join(_BY_KEY)}."
    shown = key if len(key) <= 60 else f"{key[:60]}…"
    raise InputError(f"There is no property “{shown}”.", field="property", hint=hint)
