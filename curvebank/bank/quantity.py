"""``pump.head`` and its like: callable quantities with uncertainty, domain and detail. Cold path: no numpy unless an array comes."""

from collections import namedtuple

from ..errors import BankError, ExtrapolationWarning, LawError, NumberError, OutsideDomain
from ..laws import family

Domain = namedtuple("Domain", "lo_m3h hi_m3h")
"""Flow range that was traced [m3/h]."""
Detail = namedtuple("Detail", "value u inside rule revision curves domain cautions")
"""One reading: ``u`` is {"print": ..., "machine": ...}, ``inside`` False where it was continued, ``curves`` the lines behind it."""

UNITS = {"head": "m", "npshr": "m", "suction_lift": "m", "power": "kW", "input_power": "kW"}
NAMES = {
    "head": "head",
    "efficiency": "efficiency",
    "power": "power",
    "npshr": "NPSH required",
    "suction_lift": "permissible suction lift",
    "input_power": "electrical input power",
    "overall_efficiency": "overall efficiency",
}
CACHE = 4096


def plain(value):
    """True for a plain number (numpy's float64 counts, it is a float; True and False do not)."""
    return isinstance(value, (float, int)) and not isinstance(value, bool)


def number(value, name):
    """A float of anything that is one number: int, float, Decimal, Fraction, a scalar of numpy.

    Raises
    ------
    NumberError
        Text, None, a truth value, or anything else that is no number; ``name`` is the argument that the message names.
    """
    kind = getattr(getattr(value, "dtype", None), "kind", "f")
    if isinstance(value, (str, bytes, bytearray, bool)) or kind not in "fiuO":
        raise NumberError(no_number(value, name))
    try:
        return float(value)
    except (TypeError, ValueError):
        raise NumberError(no_number(value, name)) from None


def no_number(value, name):
    """The sentence about an argument that is no number."""
    shown = repr(value)
    shown = shown if len(shown) <= 40 else shown[:39] + "…"
    return f"{name} is {shown} ({type(value).__name__}), which is no number. Give a number or an array of numbers, such as 150.0."


class Quantity:
    """One quantity of one revision, read at any flow, diameter and speed. Call it; plain numbers in, float out, arrays in, array out."""

    def __init__(self, pump, quantity, lines, basis="catalogue"):
        self.pump = pump
        self.quantity = quantity
        self.lines = lines
        self.basis = basis
        self._plans = {}
        self.carries_speed = quantity == "npshr" or quantity in family.SPEED
        self._diameters = sorted({li.diameter_mm for li in lines if li.diameter_mm is not None})
        self._speeds = sorted({li.speed_rpm for li in lines if li.speed_rpm is not None})

    def __repr__(self):
        return f"<{self.quantity} of {self.pump.key} revision {self.pump.revision}>"

    def __call__(self, flow_m3h, diameter_mm=None, speed_rpm=None, *, outside="error"):
        """The value at a flow.

        Parameters
        ----------
        flow_m3h : float or array
            Flow [m3/h].
        diameter_mm : float or array, optional
            Impeller diameter [mm]; may be left out where only one line exists.
        speed_rpm : float or array, optional
            Speed [1/min]; the printed one where left out.
        outside : str
            Beyond the traced flow: "error", "nan", or "extrapolate" (the end's tangent for at most 10 % of the domain, with a warning).

        Returns
        -------
        float or float64 array of broadcast shape

        Raises
        ------
        OutsideDomain
            Beyond what was traced; the message names the domain.
        NumberError
            Text, None, truth values: nothing is converted in silence.
        """
        if isinstance(flow_m3h, float) or type(flow_m3h) is int:
            try:
                reading = self._plans[diameter_mm, speed_rpm]
            except (KeyError, TypeError):
                reading = None
            if reading is not None and reading.lo <= flow_m3h <= reading.hi:
                return reading.value(flow_m3h)
        return self._read(flow_m3h, diameter_mm, speed_rpm, outside)

    def uncertainty(self, flow_m3h, diameter_mm=None, speed_rpm=None, *, of, outside="error"):
        """Standard uncertainty (k = 1), in the quantity's unit.

        Parameters
        ----------
        of : str
            ``"print"``: of what was printed, as read here. ``"machine"``: print plus what a delivered pump may deviate, by the
            curve's basis. There is no default, because the two differ by an order of magnitude.
        """
        _check_of(of)
        return self._read(flow_m3h, diameter_mm, speed_rpm, outside, of=of)

    def domain(self, diameter_mm=None, speed_rpm=None):
        """The traced flow range at a diameter and speed, as `Domain`."""
        reading = self.plan(diameter_mm, speed_rpm)
        return Domain(reading.lo, reading.hi)

    def detail(self, flow_m3h, diameter_mm=None, speed_rpm=None, *, of=None, outside="error"):
        """Value, uncertainty and provenance of one plain reading, as `Detail`; with ``of`` the uncertainty is that one number."""
        if not plain(flow_m3h):
            raise LawError("detail() answers for one flow at a time. Give a plain number.")
        reading = self.plan(diameter_mm, speed_rpm)
        value = self._scalar(reading, flow_m3h, outside, None)
        u = {kind: self._scalar(reading, flow_m3h, outside, kind, quiet=True) for kind in ("print", "machine")}
        if of is not None:
            _check_of(of)
            u = u[of]
        domain = Domain(reading.lo, reading.hi)
        return Detail(value, u, reading.holds(flow_m3h), reading.rule, self.pump.revision, reading.curves, domain, tuple(reading.notes))

    def plan(self, diameter_mm=None, speed_rpm=None):
        """How the quantity is read at a diameter and speed (`curvebank.laws.family.Plan`)."""
        key = (diameter_mm, speed_rpm)
        reading = self._plans.get(key)
        if reading is None:
            reading = self._make(self._pick_diameter(diameter_mm), self._pick_speed(speed_rpm, diameter_mm))
            if len(self._plans) >= CACHE:
                self._plans.clear()
            self._plans[key] = reading
        return reading

    def _make(self, diameter_mm, speed_rpm):
        return family.plan(self.quantity, self.lines, diameter_mm, speed_rpm, rule=self.pump.read_rule, span=self.pump.span)

    def diameters(self):
        """Traced diameters of this quantity [mm], ascending."""
        return list(self._diameters)

    def speeds(self):
        """Printed speeds of this quantity [1/min], ascending."""
        return list(self._speeds)

    def _pick_diameter(self, diameter_mm):
        if diameter_mm is not None:
            return number(diameter_mm, "diameter_mm")
        known = self.diameters()
        if len(known) > 1:
            listed = ", ".join(f"{d:g}" for d in known)
            raise OutsideDomain(
                f"{self._title()} is traced for Ø {listed} mm: say which diameter is meant (diameter_mm=...).", code="diameter"
            )
        return None

    def _pick_speed(self, speed_rpm, diameter_mm):
        if speed_rpm is not None:
            if not self._speeds:
                raise LawError(
                    f"The sheet states no speed for {NAMES[self.quantity]}, so it cannot be carried to another. Leave speed_rpm out."
                )
            return number(speed_rpm, "speed_rpm")
        known = self._speeds
        if len(known) <= 1:
            return known[0] if known else None
        if self.pump.rated_rpm in known:
            return self.pump.rated_rpm
        listed = ", ".join(f"{n:g}" for n in known)
        raise OutsideDomain(f"{self._title()} is traced at {listed} 1/min: say which speed is meant (speed_rpm=...).", code="speed")

    def _title(self):
        name = NAMES[self.quantity]
        return name[0].upper() + name[1:]

    def _read(self, flow, diameter, speed, outside, of=None):
        if outside not in ("error", "nan", "extrapolate"):
            raise LawError(f"outside is “{outside}”; it can be “error”, “nan” or “extrapolate”.")
        if plain(flow) and (diameter is None or plain(diameter)) and (speed is None or plain(speed)):
            try:
                reading = self.plan(diameter, speed)
            except OutsideDomain as error:
                if outside == "nan" and error.code == OutsideDomain.code:
                    return float("nan")
                raise
            return self._scalar(reading, float(flow), outside, of)
        from .arrays import read_arrays

        return read_arrays(self, flow, diameter, speed, outside, of)

    def _scalar(self, reading, flow, outside, of, quiet=False):
        if reading.holds(flow):
            return reading.value(flow) if of is None else self._u(reading, flow, of)
        if outside == "nan":
            return float("nan")
        if outside == "error":
            raise OutsideDomain(self.outside_text(reading, flow))
        if flow != flow:
            return float("nan")
        value, u = reading.beyond(flow)
        if not quiet:
            import warnings

            text = f"{self.outside_text(reading, flow)} The value is the end's tangent, with a wider band."
            warnings.warn(text, ExtrapolationWarning, stacklevel=4)
        if of is None:
            return value
        return u if of == "print" else self._machine(reading, flow, value, u)

    def outside_text(self, reading, flow):
        """The sentence that names the domain."""
        return f"{flow:g} m³/h is outside what was traced for {NAMES[self.quantity]} here, {reading.lo:.4g} to {reading.hi:.4g} m³/h."

    def _u(self, reading, flow, of):
        u = reading.uncertainty(flow)
        return u if of == "print" else self._machine(reading, flow, reading.value(flow), u)

    def _machine(self, reading, flow, value, u_print):
        from .machine import machine_uncertainty

        inside = min(max(flow, reading.lo), reading.hi) if plain(flow) else flow.clip(reading.lo, reading.hi)
        return machine_uncertainty(self.quantity, self.basis, flow, value, reading.slope(inside), u_print, self.pump.settings)


class Power(Quantity):
    """Shaft power; ``density_kgm3`` carries it from the density of the sheet to another."""

    def __call__(self, flow_m3h, diameter_mm=None, speed_rpm=None, *, density_kgm3=None, outside="error"):
        """As `Quantity`; P ~ density. The sheet's own density where left out."""
        value = super().__call__(flow_m3h, diameter_mm, speed_rpm, outside=outside)
        return value if density_kgm3 is None else value * self.density_ratio(density_kgm3)

    def uncertainty(self, flow_m3h, diameter_mm=None, speed_rpm=None, *, of, density_kgm3=None, outside="error"):
        """As `Quantity.uncertainty`, at a density."""
        u = super().uncertainty(flow_m3h, diameter_mm, speed_rpm, of=of, outside=outside)
        return u if density_kgm3 is None else u * self.density_ratio(density_kgm3)

    def density_ratio(self, density_kgm3):
        """Density asked over density of the sheet."""
        density = number(density_kgm3, "density_kgm3")
        if not density > 0:
            raise LawError(f"A density of {density_kgm3} kg/m³ is not possible. Give a number above 0.")
        return density / self.pump.density_kgm3


class Missing:
    """Stands for a quantity that the revision does not hold: any use says what is there instead."""

    def __init__(self, pump, quantity, why):
        self.pump, self.quantity, self.why = pump, quantity, why
        self.lines = ()

    def _refuse(self, *args, **kwargs):
        raise OutsideDomain(self.why, code="no-curve")

    __call__ = uncertainty = domain = detail = plan = _refuse

    def diameters(self):
        """None are traced."""
        return []

    speeds = diameters

    def __bool__(self):
        return False


def _check_of(of):
    if of not in ("print", "machine"):
        raise BankError(f"of is “{of}”; it can be “print” (the chart) or “machine” (a delivered pump).", code="usage")
