"""From what the file holds to SI: units, increments, and the analog front end."""

import math
from dataclasses import dataclass, replace

import numpy as np

from stillbench.foundation.arrays import FloatArray
from stillbench.foundation.errors import UnitError, UsageError
from stillbench.foundation.scratch import blocks, large_array
from stillbench.foundation.units import (
    ACCELERATION,
    ANGLE,
    COUNT,
    DIMENSION_WORDS,
    INDUCTION,
    NONE,
    RATE,
    RATIO,
    VELOCITY,
    VOLTAGE,
    Dimension,
    Unit,
    parse_quantity,
    parse_unit,
)
from stillbench.vocabulary import quantity as q
from stillbench.vocabulary.finding import Finding
from stillbench.vocabulary.log_sheet import FrontEnd
from stillbench.vocabulary.quantity import Quantity
from stillbench.vocabulary.record import FrontEndModel
from stillbench.vocabulary.sensor_log import Channel

BY_DIMENSION: dict[Dimension, Quantity] = {
    RATE: q.ANGULAR_RATE,
    ACCELERATION: q.ACCELERATION,
    VOLTAGE: q.VOLTAGE,
    COUNT: q.COUNT,
    INDUCTION: q.INDUCTION,
}


@dataclass(frozen=True)
class Conversion:
    """How one channel becomes SI: ``value * gain + shift``, then over the interval for increments.

    Attributes
    ----------
    quantity : Quantity
    gain, shift : float
    unit : Unit
        In which the timeline is drawn.
    front_end : FrontEndModel or None
    limits : (float, float) or None
        Of the converter, SI of the quantity.
    findings : tuple of Finding
    nominal : float or None
        Nominal reference of a ratiometric output, in the unit of the log.
    step : float or None
        Of the converter, SI of the quantity.
    """

    quantity: Quantity
    gain: float
    shift: float
    unit: Unit
    front_end: FrontEndModel | None
    limits: tuple[float, float] | None
    findings: tuple[Finding, ...]
    nominal: float | None = None
    step: float | None = None

    def apply(self, values: FloatArray, reference: FloatArray | None = None) -> FloatArray:
        """Convert samples to SI; the offset is taken off before scaling, so that it costs no digits.

        Parameters
        ----------
        values : (n,) float array
            In the unit of the log.
        reference : (n,) float array, optional
            Of a ratiometric output: readings count at the nominal reference.
        """
        made = large_array(values.size)
        with np.errstate(over="ignore", invalid="ignore", divide="ignore"):
            for part in blocks(values.size):
                block = made[part]
                if reference is not None and self.nominal is not None:
                    np.multiply(values[part], self.nominal / reference[part], out=block)
                    block += self.shift / self.gain
                else:
                    np.add(values[part], self.shift / self.gain, out=block)
                block *= self.gain
        return made


def convert(channel: Channel, front_end: FrontEnd | None, interval: float) -> Conversion:
    """Work out how a channel becomes SI.

    Raises
    ------
    UnitError
        When the unit is of a dimension that cannot be characterized, or front end and unit do not fit.
    """
    if channel.kind == "increment":
        if front_end is not None:
            raise UsageError(
                f"channel {channel.label!r} holds increments and has a front end",
                "one of them",
                "correct the log sheet",
            )
        return _increments(channel, interval)
    if front_end is not None and front_end.scale_factor is not None:
        conversion = _through_front_end(channel, front_end)
        nominal = _nominal(channel, front_end)
        return replace(conversion, nominal=nominal, step=_step(front_end, conversion))
    dimension = channel.unit.dimension
    if dimension not in BY_DIMENSION:
        way_out = (
            'increments are declared with kind = "increment" under [channel.NAME] in a log sheet'
            if dimension in (ANGLE, VELOCITY)
            else "give a unit such as deg/s, m/s^2, V, T or count"
        )
        raise UnitError(
            channel.unit.text,
            f"channel {channel.label!r} is in {channel.unit.text}, {DIMENSION_WORDS.get(dimension, 'a compound unit')}",
            "a rate, an acceleration, a voltage, a flux density or a count",
            way_out,
        )
    quantity = BY_DIMENSION[dimension]
    findings: tuple[Finding, ...] = ()
    if quantity in (q.VOLTAGE, q.COUNT):
        findings = (
            Finding(
                "scale_factor_unknown",
                None,
                None,
                None,
                "",
                excluded=False,
                because=f"the log is in {channel.unit.text} and no scale factor is declared",
                disposition=f"all results stay in {channel.unit.text}; they say nothing of a rate",
            ),
        )
    zero, model = 0.0, None
    if front_end is not None and (front_end.zero is not None or front_end.scale_factor_uncertainty is not None):
        # A log already in its own unit: the zero is taken off, the uncertainty is a common factor all the same.
        zero = _zero(front_end, channel.unit)
        relative = _uncertainty(front_end.scale_factor_uncertainty)[0] if front_end.scale_factor_uncertainty else 0.0
        text = f"zero {front_end.zero or 'not declared'}"
        if front_end.scale_factor_uncertainty:
            text += f", scale factor of standard uncertainty {front_end.scale_factor_uncertainty}"
        model = FrontEndModel(zero, 1.0, relative, text)
    limits = _limits(front_end, channel.unit, channel.unit.factor, -zero)
    return Conversion(quantity, channel.unit.factor, -zero, channel.unit, model, limits, findings)


def _zero(front_end: FrontEnd, unit: Unit) -> float:
    """Return the declared zero in SI of the reading."""
    if front_end.zero is None:
        return 0.0
    zero, given = parse_quantity(front_end.zero, "the zero")
    if given.dimension != unit.dimension:
        raise UnitError(given.text, f"the zero is {front_end.zero!r}", f"a unit like {unit.text}")
    return zero * given.factor


def _increments(channel: Channel, interval: float) -> Conversion:
    quantity = {ANGLE: q.ANGULAR_RATE, VELOCITY: q.ACCELERATION}.get(channel.unit.dimension)
    if quantity is None:
        raise UnitError(
            channel.unit.text,
            f"channel {channel.label!r} is declared as increments in {channel.unit.text}",
            "an angle (deg, arcsec, rad, urad) or a velocity (m/s) per sample",
            "correct kind or unit in the log sheet",
        )
    spoken = parse_unit("deg/s" if quantity is q.ANGULAR_RATE else "m/s^2")
    return Conversion(quantity, channel.unit.factor / interval, 0.0, spoken, None, None, ())


def _through_front_end(channel: Channel, front_end: FrontEnd) -> Conversion:
    scale, scale_unit = parse_quantity(front_end.scale_factor or "", "the scale factor")
    scale = -scale if front_end.sign == "-" else scale
    to_volts = scale_unit.dimension * RATE == VOLTAGE or scale_unit.dimension * ACCELERATION == VOLTAGE
    if channel.unit.dimension == COUNT and to_volts:
        return _through_converter(channel, front_end)
    dimension = channel.unit.dimension * scale_unit.dimension**-1
    quantity = {RATE: q.ANGULAR_RATE, ACCELERATION: q.ACCELERATION}.get(dimension)
    if quantity is None or scale == 0:
        raise UnitError(
            scale_unit.text,
            f"a reading in {channel.unit.text} over a scale factor of {front_end.scale_factor!r} is no rate",
            "a scale factor such as 48.2 mV/(deg/s) or 1.2 V/g, not zero",
        )
    zero = _zero(front_end, channel.unit)
    factor = scale * scale_unit.factor
    relative, findings = _uncertainty(front_end.scale_factor_uncertainty)
    degrees = "deg" in (front_end.scale_factor or "") or "\N{DEGREE SIGN}" in (front_end.scale_factor or "")
    if quantity is q.ANGULAR_RATE:
        spoken = parse_unit("deg/s" if degrees or "dps" in (front_end.scale_factor or "") else "rad/s")
    else:
        spoken = parse_unit("m/s^2" if "m/s" in scale_unit.text or "m*" in scale_unit.text else "g")
    text = f"zero {front_end.zero or 'not declared'}, scale factor {front_end.scale_factor}"
    if front_end.scale_factor_uncertainty:
        text += f", standard uncertainty {front_end.scale_factor_uncertainty}"
    if front_end.scale_factor_origin:
        text += f" ({front_end.scale_factor_origin})"
    if front_end.sign == "-":
        text += ", sign turned over"
    if front_end.reference:
        text += f", ratiometric to {front_end.reference!r} at {front_end.reference_nominal}"
    gain = channel.unit.factor / factor
    model = FrontEndModel(zero, factor, relative, text)
    limits = _limits(front_end, channel.unit, 1.0 / factor, -zero / factor)
    return Conversion(quantity, gain, -zero / factor, spoken, model, limits, findings)


def _through_converter(channel: Channel, front_end: FrontEnd) -> Conversion:
    """Turn counts into volts by range and bits, volts into the quantity by the scale factor."""
    if front_end.range is None or front_end.bits is None:
        raise UsageError(
            f"channel {channel.label!r} is in counts and its scale factor in {front_end.scale_factor}",
            "range and bits of the converter, by which counts become volts",
            'write range = "+-10 V" and bits = 16 beside it',
        )
    low, high, unit = _range(front_end.range)
    step = (high - low) / 2.0**front_end.bits
    signed = _signed(channel, front_end, low)
    shift = 0.0 if signed and low == -high else (low + high) / 2.0 if signed else low
    # In volts, as the converter saw them: the same front end then applies.
    volts = Unit(unit.text, step, unit.dimension)
    inner = _through_front_end(
        replace(channel, unit=volts), front_end.model_copy(update={"range": None, "sign": front_end.sign})
    )
    factor = inner.front_end.scale_factor if inner.front_end else 1.0
    codes = (
        (-(2.0 ** (front_end.bits - 1)), 2.0 ** (front_end.bits - 1) - 1) if signed else (0.0, 2.0**front_end.bits - 1)
    )
    moved = inner.shift + shift / factor
    ends = sorted(code * inner.gain + moved for code in codes)
    inset = 0.25 * abs(inner.gain)
    words = f"{front_end.bits} bits over {front_end.range}, {'signed codes' if signed else 'codes from zero'}; "
    model = inner.front_end and replace(inner.front_end, text=words + inner.front_end.text)
    return replace(inner, shift=moved, limits=(ends[0] + inset, ends[1] - inset), front_end=model)


def _signed(channel: Channel, front_end: FrontEnd, low: float) -> bool:
    if front_end.codes is not None:
        return front_end.codes == "signed"
    lowest = float(np.nanmin(channel.values)) if channel.values.size else 0.0
    if lowest < 0:
        return True
    if low == 0:
        return False
    raise UsageError(
        f"the codes of channel {channel.label!r} may be signed or count from the lower end of {front_end.range!r}",
        "one of them",
        'write codes = "signed" or codes = "from zero" in the front end',
    )


def _nominal(channel: Channel, front_end: FrontEnd) -> float | None:
    if front_end.reference is None:
        return None
    if front_end.reference_nominal is None:
        raise UsageError(
            f"channel {channel.label!r} is ratiometric to {front_end.reference!r} and no nominal reference is declared",
            "the reference at which zero and scale factor hold",
            'write reference_nominal = "2.5 V" in the front end',
        )
    value, unit = parse_quantity(front_end.reference_nominal, "the nominal reference")
    if unit.dimension != channel.unit.dimension or value == 0:
        raise UnitError(
            unit.text,
            f"the nominal reference is {front_end.reference_nominal!r}",
            f"a unit like {channel.unit.text}, not zero",
        )
    return value * unit.factor / channel.unit.factor


def _step(front_end: FrontEnd, conversion: Conversion) -> float | None:
    """Return the step of the converter, SI of the quantity."""
    if front_end.range is None or front_end.bits is None or conversion.front_end is None:
        return None
    low, high, _ = _range(front_end.range)
    return abs((high - low) / 2.0**front_end.bits / conversion.front_end.scale_factor)


def _uncertainty(text: str | None) -> tuple[float, tuple[Finding, ...]]:
    if text is None:
        finding = Finding(
            "scale_factor_unknown",
            None,
            None,
            None,
            "",
            excluded=False,
            because="the scale factor is declared without an uncertainty",
            disposition="intervals and verdicts do not contain it; declare scale_factor_uncertainty",
        )
        return 0.0, (finding,)
    value, unit = parse_quantity(text, "the scale factor uncertainty")
    relative = value * unit.factor
    if unit.dimension not in (RATIO, NONE) or not 0 <= relative < 1:
        raise UsageError(
            f"the scale factor uncertainty is {text!r}", "a standard uncertainty in percent, such as '0.4 %'"
        )
    return relative, ()


def _limits(front_end: FrontEnd | None, unit: Unit, gain: float, shift: float) -> tuple[float, float] | None:
    """Lowest and highest reading of the converter, from ``'0 V to 5 V'`` or ``'+-10 V'``, in SI of the quantity."""
    if front_end is None or front_end.range is None:
        return None
    low, high, given = _range(front_end.range)
    if given.dimension != unit.dimension:
        raise UsageError(f"the converter range is {front_end.range!r}", f"two readings in a unit like {unit.text}")
    ends = (low, high)
    # The highest code of a converter lies a step below its range; rounding must not hide it.
    span = ends[1] - ends[0]
    inset = 1.25 * span / 2.0**front_end.bits if front_end.bits else 1e-9 * span
    # ``gain`` takes a reading in SI to the quantity in SI.
    scale = gain / unit.factor if math.isclose(gain, unit.factor) else gain
    first, second = (end * scale + shift for end in (ends[0] + inset / 2.0, ends[1] - inset))
    return min(first, second), max(first, second)


def _range(text: str) -> tuple[float, float, Unit]:
    """Return the ends of a converter's range, SI, and the unit they are spoken in."""
    plain = text.replace("\N{PLUS-MINUS SIGN}", "+-").strip()
    if plain.startswith("+-"):
        value, given = parse_quantity(plain[2:], "the range")
        ends = (-value * given.factor, value * given.factor)
    elif " to " in plain:
        low, high = plain.split(" to ", 1)
        upper, given = parse_quantity(high, "the range")
        low = low if any(c.isalpha() for c in low) else f"{low} {given.text}"
        lower, low_unit = parse_quantity(low, "the range")
        if low_unit.dimension != given.dimension:
            raise UsageError(f"the converter range is {text!r}", "two readings in one unit")
        ends = (lower * low_unit.factor, upper * given.factor)
    else:
        raise UsageError(f"the converter range is {text!r}", "'0 V to 5 V' or '+-10 V'")
    if not ends[1] > ends[0]:
        raise UsageError(f"the converter range is {text!r}", "a lower and a higher reading")
    return ends[0], ends[1], given
