"""Places on the sky and the moments of an observation: barycentric motion, frames, times, angles.

Angles are degrees, right ascension too, in the ICRS; longitude is positive to the east.
"""

from dataclasses import dataclass
from typing import Any

from cellfuncs.catalogue import Argument, Choice, Number, Numeric, Truth, as_array, function, shown
from cellfuncs.constants import LIGHT_SPEED
from cellfuncs.errors import CellError, InputError, MissingInput, is_empty
from cellfuncs.physics import angles, earth, frames, times
from cellfuncs.symbols import Expr, Real, choose, either, kept, node, within

WRIGHT = "Wright & Eastman 2014, PASP 126, 838"
EASTMAN = "Eastman, Siverd & Gaudi 2010, PASP 122, 935"
CAPITAINE = "Capitaine, Wallace & Chapront 2003, A&A 412, 567 (IAU 2006 precession)"
POINTING = (
    "Not for pointing limits and not for avoiding the Sun: there the observatory's rules and its "
    "trained operators decide."
)


@dataclass(frozen=True, kw_only=True)
class Moment(Numeric):
    """A moment in UTC, which the formula takes as days since 2000 January 1, 0h."""

    @property
    def allowed(self) -> str:
        return (
            "an ISO 8601 text, a spreadsheet's date-time or a Julian date above 1000000, "
            "from 1960 to 2099"
        )

    def parsed(self, value: Any) -> float:
        if is_empty(value):
            raise MissingInput(f"{self.name} is empty")
        day, fraction = times.utc_parts(value, self.name)
        return (day - earth.EPOCH) + fraction

    def symbol(self, value: Expr) -> Expr:
        # what is marked to be kept is a moment already
        return value if value.operation == "kept" else Expr("reading", node("moment"), value)

    def column(self, value: Any) -> tuple[Any, CellError | None]:
        day, fraction, wrong = times.utc_columns(as_array(value), self.name)
        return (day - earth.EPOCH) + fraction, wrong


def moment_of_number(value: Expr) -> Real:
    """Return the symbol of a moment, of a cell with a Julian date or a spreadsheet's date-time."""
    first, end = (limit - earth.EPOCH for limit in (times.FIRST_DAY, times.END_DAY))
    of_serial = value - Expr("DATE", *map(node, (2000.0, 1.0, 1.0)))
    days = kept("days since 2000", Expr("IF", value > 1e6, value - earth.EPOCH, of_serial))
    return kept("UTC since 2000", within((days >= first) & (days < end), days, "", lambda: days))


@dataclass(frozen=True, kw_only=True)
class Angle(Number):
    """An angle in degrees; one that is written otherwise is told how to get there."""

    reading: str
    """The call that reads a text"""

    def _as_float(self, value: Any) -> float:
        if isinstance(value, str) and value.strip():
            raise InputError(
                f"{self.name} is {shown(value)}, not a number of degrees; {self.reading} reads it"
            )
        return super()._as_float(value)


@dataclass(frozen=True, kw_only=True)
class AngleText(Argument):
    """An angle in any common writing: a text, or decimal degrees."""

    @property
    def allowed(self) -> str:
        return "degrees or hours, minutes and seconds in any common writing"

    def parsed(self, value: Any) -> Any:
        if is_empty(value):
            raise MissingInput(f"{self.name} is empty")
        return value


RIGHT_ASCENSION = Angle(
    meaning="right ascension (ICRS)",
    unit="deg",
    at_least=0.0,
    at_most=360.0,
    reading="ANGLE_FROM_TEXT(ra, TRUE)",
)
DECLINATION = Angle(
    meaning="declination (ICRS)",
    unit="deg",
    at_least=-90.0,
    at_most=90.0,
    reading="ANGLE_FROM_TEXT(dec)",
)
UTC = Moment(meaning="moment, UTC; a Modified Julian Date wants 2400000.5 added", unit="d")
LONGITUDE = Angle(
    meaning="longitude of the observatory, east positive",
    unit="deg",
    at_least=-180.0,
    at_most=360.0,
    reading="ANGLE_FROM_TEXT(longitude)",
)
LATITUDE = Angle(
    meaning="geodetic latitude of the observatory",
    unit="deg",
    at_least=-90.0,
    at_most=90.0,
    reading="ANGLE_FROM_TEXT(latitude)",
)
HEIGHT = Number(meaning="height above the ellipsoid", unit="m", at_least=-500.0, at_most=20_000.0)
FRAME = Choice(meaning="frame of the velocity", choices=frames.NAMES)

OBSERVED: dict[str, Any] = {
    "ra": RIGHT_ASCENSION,
    "dec": DECLINATION,
    "utc": UTC,
    "longitude": LONGITUDE,
    "latitude": LATITUDE,
    "height": HEIGHT,
}


@function(
    **OBSERVED,
    unit="km/s",
    source=WRIGHT,
    examples=('=VELOCITY_BARYCENTRIC(101.287, -16.716, "2026-12-24T03:30", -70.4, -24.6, 2600)',),
)
def velocity_barycentric(
    ra: Real, dec: Real, utc: Real, longitude: Real, latitude: Real, height: Real
) -> Real:
    """Velocity to combine with a measured shift, so that it becomes the barycentre's.

    The observer's motion toward the target, with time dilation and the Sun's and the Earth's
    gravity. Combine it as (1 + z)(1 + v/c) − 1, never as z + v/c: REDSHIFT_BARYCENTRIC does.
    """
    return LIGHT_SPEED * (earth.barycentric_factor(ra, dec, utc, longitude, latitude, height) - 1)


@function(
    **OBSERVED,
    unit="km/s",
    source=WRIGHT,
    examples=('=VELOCITY_HELIOCENTRIC(101.287, -16.716, "2026-12-24T03:30", -70.4, -24.6, 2600)',),
)
def velocity_heliocentric(
    ra: Real, dec: Real, utc: Real, longitude: Real, latitude: Real, height: Real
) -> Real:
    """The same about the Sun's centre, which itself moves by up to 16 m/s about the barycentre.

    For comparing with older catalogues; for new work use VELOCITY_BARYCENTRIC.
    """
    return LIGHT_SPEED * (earth.heliocentric_factor(ra, dec, utc, longitude, latitude, height) - 1)


@function(
    z=Number(meaning="redshift as measured", above=-1.0),
    **OBSERVED,
    unit="",
    source=WRIGHT,
    examples=(
        '=REDSHIFT_BARYCENTRIC(0.0512, 101.287, -16.716, "2026-12-24T03:30", -70.4, -24.6, 2600)',
    ),
)
def redshift_barycentric(
    z: Real, ra: Real, dec: Real, utc: Real, longitude: Real, latitude: Real, height: Real
) -> Real:
    """Redshift as it would be measured at the solar system's barycentre."""
    factor = earth.barycentric_factor(ra, dec, utc, longitude, latitude, height)
    return z * factor + (factor - 1)


@function(
    velocity=Number(meaning="velocity, receding positive", unit="km/s"),
    ra=RIGHT_ASCENSION,
    dec=DECLINATION,
    from_frame=FRAME,
    to_frame=FRAME,
    unit="km/s",
    source="; ".join(f"{name}: {each.source}" for name, each in frames.frames().items()),
    examples=('=VELOCITY_IN_FRAME(1250, 187.706, 12.391, "barycentric", "cmb")',),
)
def velocity_in_frame(velocity: Real, ra: Real, dec: Real, from_frame: Any, to_frame: Any) -> Real:
    """Velocity taken from one frame to another by the motion along the line of sight.

    The two motions are added, as catalogues do. Of a distant source this is right for cz only
    as far as z is small: there, combine redshifts with REDSHIFT_COMBINED.
    """
    toward = earth.direction(ra, dec)

    def along(frame: Any) -> Real:
        return choose(
            frame,
            **{
                name: (lambda motion=each.motion: earth.dot(motion, toward))
                for name, each in frames.frames().items()
            },
        )

    return velocity + along(to_frame) - along(from_frame)


@function(
    utc=UTC,
    unit="d",
    source="the Julian date: IAU 1997 resolution B1",
    examples=('=TIME_JULIAN("2026-12-24T03:30:15")',),
)
def time_julian(utc: Real) -> Real:
    """Julian date, UTC."""
    return earth.EPOCH + utc


@function(
    utc=UTC,
    ra=RIGHT_ASCENSION,
    dec=DECLINATION,
    longitude=LONGITUDE,
    latitude=LATITUDE,
    height=HEIGHT,
    unit="d",
    source=EASTMAN,
    examples=('=TIME_BARYCENTRIC("2026-12-24T03:30", 101.287, -16.716, -70.4, -24.6, 2600)',),
)
def time_barycentric(
    utc: Real, ra: Real, dec: Real, longitude: Real, latitude: Real, height: Real
) -> Real:
    """Barycentric Julian date in TDB: when the light would have met the barycentre."""
    return earth.barycentric_date(ra, dec, utc, longitude, latitude, height)


@function(
    utc=UTC,
    longitude=LONGITUDE,
    unit="h",
    source=CAPITAINE,
    examples=('=TIME_SIDEREAL("2026-12-24T03:30", -70.4)',),
)
def time_sidereal(utc: Real, longitude: Real) -> Real:
    """Local apparent sidereal time."""
    return earth.sidereal_time(utc, longitude)


@function(
    **OBSERVED,
    unit="h",
    source=CAPITAINE,
    caution=POINTING,
    examples=('=ANGLE_HOUR(101.287, -16.716, "2026-12-24T03:30", -70.4, -24.6, 2600)',),
)
def angle_hour(
    ra: Real, dec: Real, utc: Real, longitude: Real, latitude: Real, height: Real
) -> Real:
    """Hour angle, west of the meridian positive, of date."""
    return earth.hour_angle(ra, dec, utc, longitude, latitude, height)


@function(
    **OBSERVED,
    unit="deg",
    source=CAPITAINE,
    caution=POINTING,
    examples=('=ALTITUDE(101.287, -16.716, "2026-12-24T03:30", -70.4, -24.6, 2600)',),
)
def altitude(ra: Real, dec: Real, utc: Real, longitude: Real, latitude: Real, height: Real) -> Real:
    """Altitude above the horizon, without refraction."""
    return earth.altitude(ra, dec, utc, longitude, latitude, height)


@function(
    **OBSERVED,
    unit="",
    source="Pickering 2002, DIO 12, 20",
    caution=POINTING,
    examples=('=AIRMASS(101.287, -16.716, "2026-12-24T03:30", -70.4, -24.6, 2600)',),
)
def airmass(ra: Real, dec: Real, utc: Real, longitude: Real, latitude: Real, height: Real) -> Real:
    """Airmass of a target above the horizon.

    At the altitude without refraction, which makes it larger: by 0.1 % at 30°, 1 % at 10°, and
    more and more toward the horizon.
    """
    above = earth.altitude(ra, dec, utc, longitude, latitude, height)
    return within(
        above > 0,
        above,
        "the target is below the horizon, at altitude {}°; the airmass wants it above 0°",
        lambda: earth.airmass(above),
    )


@function(
    text=AngleText(meaning="the angle as it is written"),
    as_hours=Truth(meaning="whether an angle without units is in hours"),
    unit="deg",
    source="common practice, no source",
    examples=('=ANGLE_FROM_TEXT("06 45 08.9", TRUE)', '=ANGLE_FROM_TEXT("-16 42 58")'),
)
def angle_from_text(text: Any, as_hours: Any = False) -> Real:
    """Angle in degrees, from degrees or hours with minutes and seconds in any common writing.

    h marks hours and d or ° degrees, whatever as_hours says. With TRUE, a bare decimal number is
    refused: it could be either.
    """
    if isinstance(text, Expr):
        return either(
            node(as_hours),
            lambda: Expr("reading", node("hours"), text),
            lambda: Expr("reading", node("degrees"), text),
        )
    return angles.degrees(text, as_hours)
