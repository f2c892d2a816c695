"""iCalendar text (RFC 5545) into its properties: unfolding, parameters, quoted values, escapes, nested components."""

from __future__ import annotations

import re

import msgspec


class Property(msgspec.Struct, frozen=True, kw_only=True):
    """One content line (RFC 5545 section 3.1): name and parameters in capitals, and the number of its first line."""

    name: str
    parameters: dict[str, str]
    value: str
    line: int


class Component(msgspec.Struct, frozen=True, kw_only=True):
    """One BEGIN ... END of the text, without the components inside it."""

    name: str
    line: int
    properties: tuple[Property, ...]

    def first(self, name: str) -> Property | None:
        """The first property of that name."""
        return next((one for one in self.properties if one.name == name), None)

    def every(self, name: str) -> list[Property]:
        """All properties of that name, in order."""
        return [one for one in self.properties if one.name == name]


class CalendarError(ValueError):
    """The text, or a value in it, is not what RFC 5545 asks for; the message is a sentence with the line."""


_NAME = re.compile(r"[A-Za-z0-9-]+")
_PARAMETER = re.compile(r';([A-Za-z0-9-]+)=((?:"[^"]*"|[^";:,]*)(?:,(?:"[^"]*"|[^";:,]*))*)')


def unfolded(text: str) -> list[tuple[int, str]]:
    """Content lines with the number of their first physical line; a line that begins with a space or a tab continues.

    CR LF is the standard's line end; a bare LF, which many programs write, is taken as well.
    """
    out: list[tuple[int, str]] = []
    for number, line in enumerate(re.split(r"\r\n|\n", text), start=1):
        if line[:1] in (" ", "\t") and out:
            first, so_far = out[-1]
            out[-1] = (first, so_far + line[1:])
        elif line:
            out.append((number, line))
    return out


def content_line(line: str, number: int) -> Property:
    """One unfolded line as a property. Raises CalendarError."""
    name = _NAME.match(line)
    if name is None:
        raise CalendarError(f"line {number}: not a line of a calendar")
    parameters, place = {}, name.end()
    while found := _PARAMETER.match(line, place):
        value = found[2]
        parameters[found[1].upper()] = value[1:-1] if value.startswith('"') and value.count('"') == 2 else value
        place = found.end()
    if line[place : place + 1] != ":":
        raise CalendarError(f"line {number}: {name[0]} has no value")
    return Property(name=name[0].upper(), parameters=parameters, value=line[place + 1 :], line=number)


def components(text: str) -> list[Component]:
    """Every component of the text in the order of their ends, inner ones before outer ones.

    Raises CalendarError when it is no calendar or its components are not closed.
    """
    done: list[Component] = []
    open_ones: list[tuple[str, int, list[Property]]] = []
    for number, line in unfolded(text.removeprefix("\ufeff")):
        found = content_line(line, number)
        if found.name == "BEGIN":
            open_ones.append((found.value.strip().upper(), number, []))
        elif not open_ones:
            raise CalendarError(f"line {number}: expected BEGIN:VCALENDAR; this is no iCalendar text (RFC 5545)")
        elif found.name == "END":
            name, first, inside = open_ones.pop()
            if found.value.strip().upper() != name:
                raise CalendarError(f"line {number}: END:{found.value} closes BEGIN:{name} of line {first}")
            done.append(Component(name=name, line=first, properties=tuple(inside)))
        else:
            open_ones[-1][2].append(found)
    if open_ones:
        raise CalendarError(f"line {open_ones[-1][1]}: BEGIN:{open_ones[-1][0]} is never closed; is the file cut off?")
    if not any(one.name == "VCALENDAR" for one in done):
        raise CalendarError("line 1: expected BEGIN:VCALENDAR; this is no iCalendar text (RFC 5545)")
    return done


_ESCAPES = {"\\n": "\n", "\\N": "\n", "\\,": ",", "\\;": ";", "\\\\": "\\"}


def plain_text(value: str) -> str:
    """A TEXT value (RFC 5545 section 3.3.11) without its escapes."""
    return re.sub(r"\\[nN,;\\]", lambda found: _ESCAPES[found[0]], value)


def text_list(value: str) -> list[str]:
    """A list of TEXT values; commas that are escaped belong to a value."""
    return [plain_text(part).strip() for part in re.findall(r"(?:\\.|[^,\\])+", value)]
