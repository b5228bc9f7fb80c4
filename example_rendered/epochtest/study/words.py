"""Sky events in plain words, the same in check, notebooks, report and artifacts."""

from __future__ import annotations

from epochtest.study.events import (
    Apsis,
    Eclipse,
    GreatestElongation,
    Grouping,
    LineUp,
    ListedDates,
    LongitudeDifference,
    LunarDeclination,
    LunarNode,
    LunarStandstill,
    MoonDistance,
    MoonPhase,
    PerigeanSpringTide,
    Season,
    SeparationMinimum,
    SkyEvent,
    Station,
)

_FRAME = {
    "geometric-J2000": "geometric directions, J2000 ecliptic",
    "apparent-of-date": "apparent directions, ecliptic of date",
}
GEOMETRIC = "geometric-J2000"
APPARENT = "apparent-of-date"


def frame_of(event: SkyEvent) -> str:
    """Name of the frame the instants are found in; "as listed" for a user's own dates."""
    match event:
        case MoonPhase() | LongitudeDifference():
            return event.frame
        case ListedDates():
            return "as listed"
        case Eclipse() | LunarNode() | LunarDeclination() | LunarStandstill():
            return APPARENT
        case PerigeanSpringTide() | Season() | Station() | GreatestElongation():
            return APPARENT
        case _:
            return GEOMETRIC


def frame_in_words(event: SkyEvent) -> str:
    """The frame as a phrase."""
    return _FRAME.get(frame_of(event), "as listed")


def event_in_words(event: SkyEvent) -> str:
    """The sky event of a claim as a phrase, without its frame."""
    match event:
        case MoonPhase():
            named = [f"{phase.replace('-', ' ')} Moon" for phase in event.phases]
            angles = [f"Moon {angle:g}° east of the Sun" for angle in event.elongations_deg]
            return " or ".join(named + angles)
        case MoonDistance():
            side = "nearest to" if event.extreme == "perigee" else "farthest from"
            return f"Moon {side} the Earth ({event.extreme})"
        case LongitudeDifference():
            what = event.aspect or (
                "difference of ecliptic longitude "
                + " or ".join(f"{angle:g}°" for angle in event.angles_deg())
            )
            return f"{what} of {_listed(event.bodies)} seen from {body_in_words(event.centre)}"
        case LineUp():
            middle = f", {body_in_words(event.middle)} in the middle" if event.middle else ""
            some = "" if len(event.bodies) == 3 else "any three of "
            return f"line-up of {some}{_listed(event.bodies)}{middle}"
        case SeparationMinimum():
            return (
                f"{_listed(event.bodies)} closest in the sky of {body_in_words(event.centre)}, "
                f"below {event.below_deg:g}°"
            )
        case Grouping():
            along = " along one line (longitudes modulo 180°)" if event.along_line else ""
            return (
                f"{_listed(event.bodies)} within {event.below_deg:g}°{along}, "
                f"seen from {body_in_words(event.centre)}"
            )
        case Eclipse():
            kinds = f"{' or '.join(event.types)} " if event.types else ""
            return f"{kinds}eclipse of {body_in_words(event.of)}"
        case LunarNode():
            return f"Moon at its {_side(event.passage, ('ascending', 'descending'))} node"
        case LunarDeclination():
            return f"Moon farthest {_side(event.extreme, ('north', 'south'))} in its month"
        case LunarStandstill():
            return f"{_side(event.size, ('major', 'minor'))} standstill of the Moon"
        case PerigeanSpringTide():
            return f"new or full Moon within {event.within_hours:g} h of perigee"
        case Season():
            return " or ".join(instant.replace("-", " ") for instant in event.instants)
        case Apsis():
            side = _side(event.extreme, ("perihelion", "aphelion"))
            return f"{side} of {body_in_words(event.body)}"
        case Station():
            turn = _side(event.turns, ("retrograde", "direct"))
            return f"{body_in_words(event.body)} stationary, turning {turn}"
        case GreatestElongation():
            side = _side(event.side, ("east", "west"))
            return f"greatest elongation {side} of {body_in_words(event.body)}"
        case ListedDates():
            return f"dates listed in {event.file}, column {event.column}"


def described(event: SkyEvent, kernel: str) -> str:
    """The event with its frame and ephemeris, as artifacts name it."""
    if isinstance(event, ListedDates):
        return event_in_words(event)
    return f"{event_in_words(event)} ({frame_in_words(event)}, {kernel})"


def body_in_words(body: str) -> str:
    """A body's name as it stands in a sentence."""
    return f"the {body.capitalize()}" if body in ("sun", "moon", "earth") else body.capitalize()


def _listed(bodies: tuple[str, ...]) -> str:
    names = [body_in_words(body) for body in bodies]
    return f"{', '.join(names[:-1])} and {names[-1]}"


def _side(chosen: str, both: tuple[str, str]) -> str:
    return " or ".join(both) if chosen == "either" else chosen
