"""What a sample of measurements gives: means, dispersions, fits, and the error of a result."""

from typing import Any

from cellfuncs.arguments import Cells, FunctionName, Sample, in_rows, part_of
from cellfuncs.catalogue import Choice, Number, Numeric, Truth, function
from cellfuncs.errors import InputError, is_empty
from cellfuncs.physics import statistics
from cellfuncs.propagation import error_function
from cellfuncs.symbols import Real, choose, either, within

BEERS = "Beers, Flynn & Gebhardt 1990, AJ 100, 32"
BEVINGTON = "Bevington & Robinson 2003, Data Reduction and Error Analysis"

VELOCITY = Number(meaning="velocity", unit="km/s")


@function(
    values=Sample(meaning="the measurements", each=Number(meaning="value", like="value")),
    sigmas=Sample(
        meaning="their 1-σ errors, or one for all",
        each=Number(meaning="error", like="value", above=0.0),
    ),
    part=part_of(mean="as values", sigma="as values", chi2="", count=""),
    unit="as part",
    source=f"{BEVINGTON}, eqs. 4.17 and 4.19",
    traceable=False,
    examples=("=MEAN_WEIGHTED({0.0501;0.0503;0.0498}, {0.0002;0.0001;0.0002})",),
)
def mean_weighted(values: Any, sigmas: Any, part: Any = "mean") -> Real:
    """Mean of measurements with errors, each with the weight 1/σ².

    "sigma" is the error of the mean that the errors given make; "chi2" tells whether they are
    believable: it should be near count − 1, and much more means that they are too small or that
    something else varies. Rows in which the value or its error is empty or a remark do not count.
    """
    found = statistics.weighted_mean(*in_rows(values, sigmas))
    return float(getattr(found, part))


@function(
    velocities=Sample(meaning="velocities of the members", each=VELOCITY),
    z_system=Number(meaning="redshift of the cluster or system", above=-1.0),
    method=Choice(meaning="how the spread is measured", choices=("biweight", "gapper", "standard")),
    part=part_of(sigma="km/s", center="km/s", error="km/s", count=""),
    unit="as part",
    source=f"{BEERS}; Danese, De Zotti & di Tullio 1980, A&A 82, 322",
    traceable=False,
    examples=('=VELOCITY_DISPERSION({6900;7150;6420;7010;6735}, 0.023, "gapper")',),
)
def velocity_dispersion(
    velocities: Any, z_system: Real = 0.0, method: Any = "biweight", part: Any = "sigma"
) -> Real:
    """Dispersion of the velocities of a cluster's members, in its rest frame.

    With velocities cz as measured, z_system takes the dispersion and its error to the rest frame
    by 1/(1+z_system); peculiar velocities are there already. "center" is the location of the
    velocities as given: their mean for "standard", the biweight location for the other two.
    "error" is that of the dispersion: from the jackknife, for "standard" σ/√(2(n−1)). The gapper
    is for samples of ten or fewer, the biweight for more; velocities that are all equal have no
    dispersion.
    """
    (sample,) = in_rows(velocities)
    return choose(
        part,
        sigma=lambda: statistics.dispersion(sample, method) / (1 + z_system),
        center=lambda: statistics.center(sample, method) + 0 * z_system,
        error=lambda: statistics.dispersion_error(sample, method) / (1 + z_system),
        count=lambda: len(sample) + 0 * z_system,
    )


@function(
    distances=Sample(
        meaning="distances", each=Number(meaning="distance", unit="Mpc", at_least=0.0)
    ),
    velocities=Sample(meaning="velocities of recession", each=VELOCITY),
    sigmas=Sample(
        meaning="1-σ errors of the velocities, or one for all",
        each=Number(meaning="error", unit="km/s", above=0.0),
        otherwise="equal weights, the error from the scatter",
    ),
    part=part_of(
        slope="km.s-1.Mpc-1",
        slope_error="km.s-1.Mpc-1",
        intercept="km/s",
        scatter="km/s",
        count="",
    ),
    through_origin=Truth(meaning="whether the line goes through the origin"),
    unit="as part",
    source=f"{BEVINGTON}, eqs. 6.12 and 6.21 to 6.23; Hubble 1929, PNAS 15, 168",
    traceable=False,
    examples=("=HUBBLE_FIT({10;20;35}, {710;1380;2450})",),
)
def hubble_fit(
    distances: Any,
    velocities: Any,
    sigmas: Any = None,
    part: Any = "slope",
    through_origin: Any = True,
) -> Real:
    """Straight line of velocities over distances by least squares: the slope is H0.

    Errors of the distances do not count. "slope_error" follows from the errors of the velocities;
    where none are given, from the scatter about the line. "scatter" is the unweighted rms of the
    residuals, with as many degrees of freedom as the line leaves. Rows in which one of the ranges
    is empty or holds a remark do not count.
    """
    d, v, s = in_rows(distances, velocities, sigmas)
    found = statistics.linear_fit(d, v, s if s.size else None, through_origin)
    return float(getattr(found, part))


@function(
    function=FunctionName(meaning="a function's name"),
    arguments=Cells(meaning="its arguments"),
    sigmas=Sample(
        meaning="their 1-σ errors, in the same order; empty or 0 where there is none",
        each=Number(meaning="error", at_least=0.0),
    ),
    unit="as function",
    source=f"{BEVINGTON}, eq. 3.14",
    traceable=False,
    examples=(
        '=UNCERTAINTY("DISTANCE_LUMINOSITY", 0.05, 0.001)',
        '=UNCERTAINTY("VELOCITY_PECULIAR", {0.0512;0.05}, {0.0001;0.00002})',
    ),
)
def uncertainty(function: Any, arguments: Any, sigmas: Any) -> Real:
    """Error (1 σ) of a function's result that the errors of its arguments make.

    First order: √Σ(∂f/∂x·σ)², with exact derivatives. It holds for errors that are independent of
    one another and so small that the function is straight over them; correlated errors it does not
    know. Arguments that are words stand in their place, without an error.
    """
    made = error_function(function)
    wanted = function.arguments
    given = list(arguments)
    while len(given) > len(wanted) and is_empty(given[-1]):
        given.pop()
    if len(given) > len(wanted):
        raise InputError(
            f"arguments has {len(given)} cells; {function.name} takes {len(wanted)}:"
            f" {function.syntax}"
        )
    given += [None] * (len(wanted) - len(given))
    errors = []
    for index, sigma in enumerate(sigmas.values.tolist()):
        if sigma != sigma:
            continue
        sigmas.argument.check(index, sigma)
        if index < len(wanted) and isinstance(wanted[index], Numeric):
            continue
        if sigma > 0:
            of = f"{wanted[index].name}, which is no number" if index < len(wanted) else "nothing"
            raise InputError(f"{sigmas.argument.place(index)} is {sigma:.10g}, the error of {of}")
    errors = [
        sigmas.values[index] if index < sigmas.values.size else 0.0
        for index, argument in enumerate(wanted)
        if isinstance(argument, Numeric)
    ]
    return made(*given, *(0.0 if error != error else float(error) for error in errors))


@function(
    value=Number(meaning="the measurement", like="value"),
    center=Number(meaning="center of the sample", like="value"),
    sigma=Number(meaning="dispersion of the sample", like="value", above=0.0),
    times=Number(meaning="how many σ are allowed", above=0.0),
    unit="",
    source="Yahil & Vidal 1977, ApJ 214, 347",
    examples=("=MEMBERSHIP(7010, 6850, 290)", "=MEMBERSHIP(9400, 6850, 290)"),
)
def membership(value: Real, center: Real, sigma: Real, times: Real = 3.0) -> Real:
    """Membership of a measurement: 1 within so many σ of a sample's center, 0 beyond.

    Repeated with the center and the dispersion of those that are left, until nothing changes, it is
    the 3-σ rule by which foreground and background are kept out of a cluster.
    """
    off, reach = abs(value - center), times * sigma

    def inside() -> Real:
        # in a column, what is empty is neither within nor beyond
        return within(off <= reach, value, "{} has no place in the sample", lambda: 1.0)

    return either(off > reach, lambda: 0.0, inside)
