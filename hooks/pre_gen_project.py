"""Look at the answers before anything is generated; one sentence per fault, all at once.

The answers stand inside a string, so this file is valid Python before it is rendered too.
A non-zero exit makes cookiecutter remove the folder it has just made.
"""

import json
import re
import sys
import unicodedata
from datetime import date, timedelta

OLDEST_PYTHON = (3, 11)

ANSWERS = r"""{{ cookiecutter | tojson }}"""

# Dates (0 h TDB) at which the packaged kernels begin and end.
KERNEL_SPANS = {
    "DE421": (date(1899, 7, 29), date(2053, 10, 9)),
    "DE440": (date(1549, 12, 31), date(2650, 1, 25)),
}
# Epochs are searched beyond the span, as far as a window reaches back into it. 60 days leave
# room for windows of up to a month and for the synodic month by which a search overshoots.
MARGIN_DAYS = 60

LONGEST_SLUG = 80
RESERVED = {"con", "prn", "aux", "nul"} | {
    device + number for device in ("com", "lpt") for number in "123456789"
}
DECIMAL = re.compile(r"[-+]?(0|[1-9][0-9]*)(\.[0-9]+)?")
DAY = re.compile(r"[0-9]{4}-[0-9]{2}-[0-9]{2}")
TEXTS = ("project_name", "author", "lab", "research_question")
# Controls, surrogates, line and paragraph separators: none of them fits on one line of text.
UNFIT_CATEGORIES = {"Cc", "Cs", "Zl", "Zp"}


def text_faults(answers):
    """Faults of the answers that may be any one line of text."""
    for key in TEXTS:
        unfit = [sign for sign in answers[key] if unicodedata.category(sign) in UNFIT_CATEGORIES]
        if unfit:
            yield (
                f"{key}: holds a line break or control character (U+{ord(unfit[0]):04X}); "
                "write it as one line of plain text."
            )
    if not answers["project_name"].strip():
        yield "project_name: is empty; give the study a name."


def slug_faults(slug):
    """Faults of the folder name, which is also the project's name for package tools."""
    if not re.fullmatch(r"[a-z0-9]([a-z0-9_-]*[a-z0-9])?", slug):
        yield (
            f"project_slug: {slug!r} is no plain folder name; use lower-case letters a-z, digits, "
            "hyphens and underscores, with a letter or digit first and last."
        )
    elif slug in RESERVED:
        yield f"project_slug: {slug!r} is a reserved name on Windows; choose another."
    if len(slug) > LONGEST_SLUG:
        yield (
            f"project_slug: is {len(slug)} characters long; "
            f"shorten it to {LONGEST_SLUG} at the most."
        )


def day_of(text):
    """The date written YYYY-MM-DD in ``text``, or None."""
    try:
        return date.fromisoformat(text) if DAY.fullmatch(text) else None
    except ValueError:
        return None


def span_faults(start_text, end_text, kernel):
    """Faults of the study span: not dates, empty, or outside the kernel."""
    days = []
    for key, text in (("span_start", start_text), ("span_end", end_text)):
        days.append(day_of(text))
        if days[-1] is None:
            yield f"{key}: {text!r} is no calendar date; write it as YYYY-MM-DD."
    start, end = days
    if start and end and not start < end:
        yield f"span_end: the span ends ({end}) before it starts ({start}); mend the dates."
    first, last = (
        KERNEL_SPANS[kernel][0] + timedelta(days=MARGIN_DAYS),
        KERNEL_SPANS[kernel][1] - timedelta(days=MARGIN_DAYS),
    )
    other = ", or answer DE440 for ephemeris" if kernel == "DE421" else ""
    for key, day in (("span_start", start), ("span_end", end)):
        if day and not first <= day <= last:
            yield (
                f"{key}: {day} is outside what {kernel} covers with {MARGIN_DAYS} days to spare "
                f"({first} to {last}); choose a day inside{other}."
            )


def number_faults(answers):
    """Faults of the magnitude and of alpha."""
    magnitude, alpha = answers["minimum_magnitude"], answers["alpha"]
    if not DECIMAL.fullmatch(magnitude):
        yield f"minimum_magnitude: {magnitude!r} is no decimal number; write it like 4.5."
    elif not -5.0 <= float(magnitude) <= 11.0:
        yield f"minimum_magnitude: {magnitude} is not between -5 and 11; choose a real magnitude."
    if not DECIMAL.fullmatch(alpha):
        yield f"alpha: {alpha!r} is no decimal number; write it like 0.05."
    elif not 0.0 < float(alpha) <= 0.5:
        yield f"alpha: {alpha} is not above 0 and at most 0.5; 0.05 is common practice."


def faults_of(answers):
    """Every fault of the answers, in the order of the prompts."""
    return [
        *text_faults(answers),
        *slug_faults(answers["project_slug"]),
        *span_faults(answers["span_start"], answers["span_end"], answers["ephemeris"]),
        *number_faults(answers),
    ]


def main():
    """Check the interpreter and the answers; exit 1 with the faults on standard error."""
    if sys.version_info < OLDEST_PYTHON:
        sys.exit(
            "cookiecutter runs on Python {}.{}; epochtest needs Python 3.11 or later, "
            "so install cookiecutter there.".format(*sys.version_info)
        )
    if hasattr(sys.stderr, "reconfigure"):
        sys.stderr.reconfigure(encoding="utf-8", errors="backslashreplace")
    answers = json.loads(ANSWERS)
    faults = faults_of({key: value for key, value in answers.items() if key[0] != "_"})
    if faults:
        sys.exit("\n".join(["Nothing was generated; these answers need mending:", *faults]))


if __name__ == "__main__":
    main()
