"""One revision of one pump, as a script sees it. Cold path: standard library only."""

import math

from ..errors import OutsideDomain
from ..laws.family import Line
from .quantity import NAMES, Missing, Power, Quantity

COLUMNS = (
    "local_id, quantity, diameter_mm, speed_rpm, level, applies_to, label, casting, basis, kind, orders, q_lo, q_hi, q_mid, q_half, "
    "c0, c1, c2, c3, c4, c5, c6, c7, c8, sigma, cov, label_by"
)
BASES = ("catalogue", "quotation", "guaranteed", "works test", "field test")
"""What a reading rests on where a pump has several: the type before one machine of it."""
VARIANTS = ("stages", "blade_angle", "pumps_running")
"""Labels that make lines of one diameter and speed different machines: they are never mixed."""


class _Read:
    """A quantity made on first use, a plain attribute from then on: a call in a loop pays for no property."""

    def __init__(self, doc):
        self.__doc__ = doc

    def __set_name__(self, owner, name):
        self.name = name

    def __get__(self, pump, owner=None):
        if pump is None:
            return self
        made = pump.__dict__[self.name] = pump.quantity(self.name)
        return made


class Pump:
    """The curves of one revision as callables: ``head``, ``efficiency``, ``power``, ``npshr`` and, where printed, ``suction_lift``,
    ``input_power``, ``overall_efficiency``. Immutable: what it reads never changes."""

    def __init__(self, bank, row):
        (self.revision_id, self.pump_id, self.key, self.maker, self.model, self.revision, self.stages, self.rated_rpm) = row[:8]
        (self.density_kgm3, self.saved_at, self.who, self.why, self.read_rule, self._settings_json) = row[8:]
        self._bank = bank
        self._rows = bank.curve_rows(self.revision_id)
        self._quantities = {}
        self._span = self._settings = None

    def __repr__(self):
        return f"<{self.key} revision {self.revision}: {self.maker} {self.model}, {', '.join(self.quantities)}>"

    head = _Read("Total head of the pump, all stages [m].")
    efficiency = _Read("Pump efficiency, a fraction.")
    power = _Read("Shaft power [kW].")
    npshr = _Read("NPSH required [m].")
    suction_lift = _Read("Permissible suction lift under the conditions that the sheet states [m].")
    input_power = _Read("Electrical input power [kW]; not shaft power.")
    overall_efficiency = _Read("Efficiency of pump and motor together, a fraction.")

    def quantity(self, name, *, group=None, basis=None, variant=None):
        """A callable quantity; ``group`` (casting), ``basis`` and ``variant`` (the printed number of stages, blade angle or pumps running)
        choose among lines where a sheet has several kinds."""
        usual = group is None and basis is None and variant is None
        if usual and name in self._quantities:
            return self._quantities[name]
        if name not in NAMES:
            raise OutsideDomain(f"“{name}” is not a quantity. Known: {', '.join(NAMES)}.", code="no-curve")
        made = self._build(name, group, basis, variant)
        if usual:
            self._quantities[name] = made
        return made

    def _build(self, name, group, basis, variant):
        rows = [r for r in self._rows if r[1] == name and r[10] is not None and (r[5] != "unknown" or r[2] is not None)]
        if basis is not None:
            rows = [r for r in rows if r[8] == basis]
        chosen = next((b for b in BASES if any(r[8] == b for r in rows)), None) if basis is None else basis
        rows = [r for r in rows if r[8] == chosen]
        groups = sorted({r[7] for r in rows if r[7] is not None})
        if group is not None:
            rows = [r for r in rows if r[7] == group]
        elif len(groups) > 1:
            return Missing(
                self,
                name,
                f"{self.key} has {NAMES[name]} for several castings: {', '.join(groups)}. Use pump.quantity({name!r}, group=...).",
            )
        wanted = variant or self._own_variant(rows)
        variants = sorted({r[6] for r in rows if r[26] in VARIANTS})
        if variants and wanted is None:
            by = next(r[26] for r in rows if r[26] in VARIANTS).replace("_", " ")
            why = f"{self.key} has {NAMES[name]} lines for {', '.join(variants)} ({by})"
            return Missing(self, name, f"{why}. Use pump.quantity({name!r}, variant=...).")
        if variants:
            rows = [r for r in rows if r[26] not in VARIANTS or r[6] == wanted]
        if not rows:
            return self._without_line(name, group, basis, variant)
        lines = [_line(r) for r in rows]
        return (Power if name == "power" else Quantity)(self, name, lines, chosen)

    def _own_variant(self, rows):
        """The line that is this pump: its own number of stages, one pump running, or the only variant there is."""
        variants = {(r[26], r[6]) for r in rows if r[26] in VARIANTS}
        own = {"stages": self.stages, "pumps_running": 1}
        for by, printed in variants:
            count = "".join(c for c in printed if c.isdigit())
            if by in own and count:
                if int(count) == own[by]:
                    return printed
            elif len(variants) == 1:
                return printed
        return None

    def _without_line(self, name, group, basis, variant):
        letters = [f"{r[6] or '?'} ({r[0]})" for r in self._rows if r[1] == name and r[5] == "unknown" and r[2] is None]
        if letters:
            why = f"The {NAMES[name]} lines of {self.key} are printed by letter without a diameter: {', '.join(letters)}."
            return Missing(self, name, f"{why} Their diameter is not guessed. Ask the maker, then file it.")
        if group is None and basis is None and variant is None and name in ("power", "efficiency"):
            from .closure import derived

            made = derived(self, name)
            if made is not None:
                return made
        has = ", ".join(NAMES[q] for q in self.quantities) or "no curve that can be read"
        which = "".join(
            f" of {what} {value!r}" for what, value in (("casting", group), ("basis", basis), ("variant", variant)) if value is not None
        )
        return Missing(self, name, f"Revision {self.revision} of {self.key} has no {NAMES[name]} line{which}. It has {has}.")

    @property
    def quantities(self):
        """Names of the quantities that were traced."""
        have = {r[1] for r in self._rows if r[10] is not None}
        return tuple(q for q in NAMES if q in have)

    @property
    def diameters_mm(self):
        """Traced diameters of the head curves, or of any curve where no head is traced [mm]."""
        of_head = {r[2] for r in self._rows if r[1] == "head" and r[2] is not None}
        return tuple(sorted(of_head or {r[2] for r in self._rows if r[2] is not None}))

    @property
    def speeds_rpm(self):
        """Printed speeds [1/min]."""
        return tuple(sorted({r[3] for r in self._rows if r[3] is not None}))

    @property
    def span(self):
        """(smallest, largest) traced diameter, or None where no curve has one."""
        if self._span is None:
            d = self.diameters_mm
            self._span = (d[0], d[-1]) if d else ()
        return self._span or None

    @property
    def settings(self):
        """The settings that this revision was saved under."""
        if self._settings is None:
            import json

            self._settings = json.loads(self._settings_json)
        return self._settings

    @property
    def state(self):
        """draft, submitted, released, superseded or withdrawn, as of now."""
        return self._bank.query("SELECT state FROM revision_state WHERE revision_id = ?", (self.revision_id,))[0][0]

    @property
    def released_at(self):
        """When it was released (UTC text), or None."""
        rows = self._bank.query("SELECT valid_from FROM release_span WHERE revision_id = ?", (self.revision_id,))
        return rows[0][0] if rows else None

    @property
    def findings(self):
        """What the checks said when the revision was saved: a list of dicts (rule, severity, subject, message, ..., key)."""
        import json

        rows = self._bank.query("SELECT json FROM finding WHERE revision_id = ? ORDER BY id", (self.revision_id,))
        return [json.loads(text) for (text,) in rows]

    @property
    def waivers(self):
        """Findings that someone took responsibility for: a list of dicts (finding, rule, subject, who, why, at)."""
        import json

        rows = self._bank.query(
            "SELECT json, who, why, at FROM event WHERE revision_id = ? AND kind = 'waived' ORDER BY seq", (self.revision_id,)
        )
        return [{**json.loads(text), "who": who, "why": why, "at": at} for text, who, why, at in rows]

    @property
    def cautions(self):
        """What can hurt someone or a machine, in sentences. They defer to the maker, local codes and a licensed engineer."""
        from .cautions import standing

        return standing(self)

    @property
    def curves(self):
        """The stored curves as dicts: id, quantity, diameter_mm, speed_rpm, level, applies_to, label, group, basis, kind, domain."""
        names = ("id", "quantity", "diameter_mm", "speed_rpm", "level", "applies_to", "label", "group", "basis", "kind")
        return [{**dict(zip(names, r, strict=False)), "domain": None if r[10] is None else (r[11], r[12])} for r in self._rows]

    def bep(self, diameter_mm=None, speed_rpm=None):
        """The best-efficiency point at a diameter (the largest where left out), as `Duty`; None where efficiency or head is not known."""
        from .choice import best_efficiency

        return best_efficiency(self, diameter_mm, speed_rpm)

    def duty(self, static_head_m, friction_m_per_m3h2, diameter_mm=None, speed_rpm=None, *, exponent=2.0, density_kgm3=None):
        """Where the pump meets the system H = static + friction x Q^exponent: a list of `Duty`, by flow.

        Raises
        ------
        OutsideDomain
            They do not meet within the traced range (code ``no-duty``); the message says on which side.
        """
        from .duty import duties

        return duties(self, static_head_m, friction_m_per_m3h2, diameter_mm, speed_rpm, exponent, density_kgm3)

    def trim_for(self, flow_m3h, head_m, speed_rpm=None):
        """The impeller diameter that meets a duty, as `Trim`.

        Raises
        ------
        OutsideDomain
            No traced diameter reaches it.
        """
        from .choice import trim_for

        return trim_for(self, flow_m3h, head_m, speed_rpm)

    def closure(self, flow_m3h, diameter_mm=None, speed_rpm=None):
        """How far traced power, head and efficiency are from agreeing: traced power over rho g Q H / efficiency, minus 1."""
        from .closure import closure

        return closure(self, flow_m3h, diameter_mm, speed_rpm)


def _line(row):
    scaled = row[15 : 16 + row[10]]
    diameter = None if row[5] == "all" else row[2]  # a line for all diameters stays one, even where the sheet names its own
    return Line(row[0], diameter, row[3], row[11], row[12], row[13], row[14], scaled, row[24] if row[24] is not None else math.nan, row[25])
