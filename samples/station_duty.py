"""Where will Cross Drain pump no. 2 run, and what trim would a new duty need? A calculation script on a bank of curves.

    curvebank demo --bank station.db --no-serve
    python samples/station_duty.py station.db

The pump was trimmed to 311 mm, which is not on the printed sheet: the bank reads it between Ø 310 and Ø 330. Two
uncertainties stand beside each value (k = 1): what a delivered pump may deviate, and what reading the paper adds.
The station, its pumps and all numbers are invented.
"""

import argparse

import curvebank

DIAMETER_MM = 311
STATIC_HEAD_M = 12.0
FRICTION_M_PER_M3H2 = 2.1e-4
NEW_DUTY = {"flow_m3h": 250, "head_m": 27.0}
UNITS = {"head": ("m", 1), "efficiency": ("%", 100), "power": ("kW", 1), "npshr": ("m", 1)}


def table(pump, flows_m3h):
    """Lines of text: each quantity at each flow, with what a delivered pump and what the print may deviate."""
    yield f"{'flow m³/h':>10}  {'head m':>22}  {'efficiency %':>22}  {'power kW':>22}  {'NPSHr m':>22}"
    for flow in flows_m3h:
        cells = []
        for name, (_, scale) in UNITS.items():
            quantity = getattr(pump, name)
            at = {"flow_m3h": flow} if name == "npshr" else {"flow_m3h": flow, "diameter_mm": DIAMETER_MM}
            value = scale * quantity(**at)
            machine, printed = (scale * quantity.uncertainty(**at, of=of) for of in ("machine", "print"))
            cells.append(f"{value:8.2f} ± {machine:4.2f} ({printed:4.2f})")
        yield f"{flow:10.0f}  " + "  ".join(f"{c:>22}" for c in cells)


def show(unit, value, digits=1):
    """A number with its unit, or a plain word where the bank does not know."""
    return "not known" if value is None else f"{value:.{digits}f} {unit}"


def main(argv=None):
    """Command line."""
    parser = argparse.ArgumentParser(description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter)
    parser.add_argument("bank", help="bank file, for example one that `curvebank demo` made")
    parser.add_argument("--pump", default="LARK-WM-150")
    parser.add_argument("--revision", type=int, help="pin a revision; the released one when left out")
    options = parser.parse_args(argv)

    bank = curvebank.open(options.bank)
    pump = bank.pump(options.pump, revision=options.revision)
    print(f"{pump.key} revision {pump.revision}, {pump.state}, read at Ø {DIAMETER_MM} mm by rule {pump.read_rule}")
    print("value ± delivered pump (print alone), standard uncertainties\n")
    print("\n".join(table(pump, (100, 150, 200, 250, 300))))

    print(f"\nDuty on H = {STATIC_HEAD_M:g} m + {FRICTION_M_PER_M3H2:g} Q²:")
    cautions = list(pump.cautions)
    for duty in pump.duty(STATIC_HEAD_M, FRICTION_M_PER_M3H2, diameter_mm=DIAMETER_MM):
        eta = None if duty.efficiency is None else 100 * duty.efficiency
        print(
            f"  {show('m³/h', duty.flow_m3h)} at {show('m', duty.head_m, 2)}, efficiency {show('%', eta)}, "
            f"power {show('kW', duty.power_kw)}, NPSHr {show('m', duty.npshr_m, 2)}{'' if duty.stable else ', unstable'}"
        )
        cautions += duty.cautions

    trim = pump.trim_for(**NEW_DUTY)
    methods = ", ".join(f"{name} {mm:.1f}" for name, mm in trim.methods.items())
    print(f"\nTrim for {NEW_DUTY['flow_m3h']:g} m³/h at {NEW_DUTY['head_m']:g} m: Ø {trim.diameter_mm:.1f} mm  ({methods})")
    cautions += trim.cautions

    print("\nCautions:")
    for text in dict.fromkeys(str(c) for c in cautions):
        print(f"  - {text}")
    bank.close()


if __name__ == "__main__":
    main()
