"""A slow, plain second reading of lines, written from the rules in words and not from the parsers' code.

One line at a time, one character at a time where it matters; json and datetime of the standard library do
what they can.
"""

from __future__ import annotations

import datetime as dt
import json
import math
import re
from zoneinfo import ZoneInfo

from monitor.parse import LineFormat


class Num(str):
    """A JSON number as it was written."""


def read(format_: LineFormat, block: bytes, header: bytes | None = None, first: bool = False):
    """(lines, events, skipped, rejected); an event is (size, stamp, stream, start, end)."""
    events, skipped, rejected = [], {}, {}
    at = count = 0
    while at < len(block):
        end = block.index(b"\n", at)
        line = block[at:end]
        is_first = first and at == 0
        if is_first and line.startswith(b"\xef\xbb\xbf"):
            line = line[3:]
        if is_first and header is None:
            header = line
        kind, value = read_line(format_, line, header, is_first)
        if kind == "event":
            events.append((*value, at, end))
        else:
            account = skipped if kind == "skip" else rejected
            account[value] = account.get(value, 0) + 1
        count += 1
        at = end + 1
    return count, events, skipped, rejected


def read_line(f: LineFormat, line: bytes, header: bytes | None, is_first: bool):
    named = f.header if f.header is not None else any(isinstance(x, str) for x in wanted(f))
    if f.lines == "csv" and is_first and named:
        return "skip", "header"
    if all(c in b" \t\r\x0b\x0c" for c in line):
        return "skip", "blank"
    try:
        text = line.decode("utf-8")
    except UnicodeDecodeError:
        return "reject", "not UTF-8"
    if text.endswith("\r"):
        text = text[:-1]
    if f.lines == "json":
        return json_line(f, text)
    if f.lines == "number":
        fields = {None: text}
    elif f.lines == "csv":
        fields = csv_fields(f, text, header, named)
    elif f.lines == "combined":
        fields = combined_fields(text)
    elif f.lines == "pairs":
        fields = pairs_fields(text)
    else:
        fields = pattern_fields(f, text)
    if isinstance(fields, str):
        return "reject", fields
    return judge_text(f, fields)


def wanted(f: LineFormat):
    return [x for x in [f.size, f.time, *f.stream, *(w[0] for w in f.where)] if x is not None]


def judge_text(f: LineFormat, fields):
    def get(name):
        text = fields.get(name)
        return None if text is None else text.strip(" \t") or None

    for name, values in f.where:
        if get(name) not in values:
            return "skip", "condition"
    text = get(f.size)
    if text is None:
        return "reject", "field missing"
    if text.lower().lstrip("+-") in ("inf", "infinity", "nan") and not re.match(r"[+-]{2}", text):
        return "reject", "not finite"
    if not re.fullmatch(r"[+-]?([0-9]+(\.[0-9]*)?|\.[0-9]+)([eE][+-]?[0-9]+)?", text):
        return "reject", "not a number"
    stamp = None if f.time is None else (stamp_of(f, get(f.time)) if get(f.time) else "bad")
    names = [get(s) for s in f.stream]
    return judge(f, float(text), stamp, names)


def judge(f: LineFormat, size: float, stamp, names):
    size *= f.scale
    if math.isinf(size) or math.isnan(size):
        return "reject", "not finite"
    if size == 0:
        return "reject", "zero"
    if size < 0:
        return "reject", "negative"
    if stamp == "bad":
        return "reject", "no usable time"
    stream = ""
    if f.stream:
        if None in names or "" in names:
            return "reject", "stream name unusable"
        stream = "/".join(names)
        if len(stream) > 200 or not stream.isprintable():
            return "reject", "stream name unusable"
    return "event", (size, stamp, stream)


# -- JSON


def json_line(f: LineFormat, text: str):
    if json_depth(text) > 100:
        return "reject", "nested too deep"
    try:
        top = json.loads(text, parse_int=Num, parse_float=Num, parse_constant=refuse, object_pairs_hook=checked_pairs)
        no_surrogates(top)
    except ValueError:
        return "reject", "not JSON"
    if not isinstance(top, dict):
        return "reject", "field missing"
    for path, values in f.where:
        found, value = follow(top, path)
        if not found or not json_matches(value, values):
            return "skip", "condition"
    found, size = follow(top, f.size)
    if not found:
        return "reject", "field missing"
    if not isinstance(size, Num):
        return "reject", "not a number"
    stamp = None
    if f.time is not None:
        _, value = follow(top, f.time)
        stamp = json_stamp(f, value)
    names = [json_name(*follow(top, s)) for s in f.stream]
    return judge(f, float(size), stamp, names)


def refuse(_):
    raise ValueError


def checked_pairs(pairs):
    """An object; also what a later value of the same name replaces has to be text."""
    for key, value in pairs:
        no_surrogates(key)
        no_surrogates(value)
    return dict(pairs)


def no_surrogates(value):
    if isinstance(value, dict):
        for k, v in value.items():
            no_surrogates(k)
            no_surrogates(v)
    elif isinstance(value, list):
        for v in value:
            no_surrogates(v)
    elif isinstance(value, str):
        value.encode("utf-8")


def json_depth(text: str) -> int:
    deepest = depth = 0
    in_string = escaped = False
    for c in text:
        if in_string:
            if escaped:
                escaped = False
            elif c == "\\":
                escaped = True
            elif c == '"':
                in_string = False
        elif c == '"':
            in_string = True
        elif c in "[{":
            depth += 1
            deepest = max(deepest, depth)
        elif c in "]}":
            depth -= 1
    return deepest


def follow(top, path: str):
    value = top
    for name in path.split("."):
        if not isinstance(value, dict) or name not in value:
            return False, None
        value = value[name]
    return True, value


def is_whole(n: Num) -> bool:
    return re.fullmatch(r"-?[0-9]+", n) is not None


def json_matches(value, values) -> bool:
    if isinstance(value, Num):
        return any(is_float(v) and float(v) == float(value) for v in values)
    if value is True or value is False or value is None:
        return {True: "true", False: "false", None: "null"}[value] in values
    return isinstance(value, str) and value in values


def is_float(text: str) -> bool:
    try:
        float(text)
    except ValueError:
        return False
    return True


def json_name(found: bool, value):
    if not found:
        return None
    if isinstance(value, Num):
        return str(int(value)) if is_whole(value) else None
    if value is True or value is False:
        return "true" if value else "false"
    return value if isinstance(value, str) else None


def json_stamp(f: LineFormat, value):
    if isinstance(value, Num):
        if is_whole(value):
            return epoch(f, int(value), 0)
        number = float(value)
        if not 0 <= number < 1e19:
            return "bad"
        unit = unit_of(f, number)
        micros = round(number * {"s": 1e6, "ms": 1e3, "us": 1.0, "ns": 1e-3}[unit])
        return in_range(micros * 1000)
    return stamp_of(f, value) if isinstance(value, str) else "bad"


# -- times


def unit_of(f: LineFormat, number) -> str:
    if f.time_unit != "auto":
        return f.time_unit
    return "s" if number < 1e11 else "ms" if number < 1e14 else "us" if number < 1e17 else "ns"


def epoch(f: LineFormat, whole: int, nano: int):
    factor = {"s": 10**9, "ms": 10**6, "us": 10**3, "ns": 1}[unit_of(f, whole)]
    return in_range(whole * factor + nano * factor // 10**9)


def in_range(ns: int):
    last = int(dt.datetime(2201, 1, 1, tzinfo=dt.UTC).timestamp()) * 10**9
    return ns if 0 <= ns < last else "bad"


MONTHS = ["Jan", "Feb", "Mar", "Apr", "May", "Jun", "Jul", "Aug", "Sep", "Oct", "Nov", "Dec"]


def stamp_of(f: LineFormat, text: str):
    if m := re.fullmatch(r"([0-9]{1,19})(?:\.([0-9]+))?", text):
        return epoch(f, int(m[1]), int((m[2] or "").ljust(9, "0")[:9]))
    m = re.fullmatch(r"([0-9]{4})-([0-9]{2})-([0-9]{2})(.*)", text, re.DOTALL)
    if m:
        year, month, day, rest = int(m[1]), int(m[2]), int(m[3]), m[4]
        hour = minute = second = nano = 0
        if rest:
            t = re.fullmatch(r"[Tt ]([0-9]{2}):([0-9]{2})(?::([0-9]{2})(?:[.,]([0-9]+))?)?(.*)", rest, re.DOTALL)
            if not t:
                return "bad"
            hour, minute, second = int(t[1]), int(t[2]), int(t[3] or 0)
            nano = int((t[4] or "").ljust(9, "0")[:9])
            rest = t[5]
        zone = rest
    else:
        bare = text[1:-1] if text[:1] == "[" and text[-1:] == "]" else text
        m = re.fullmatch(
            r"([0-9]{2})/([A-Za-z]{3})/([0-9]{4}):([0-9]{2}):([0-9]{2}):([0-9]{2})(?: ([^ ]+))?", bare, re.DOTALL
        )
        if not m or m[2] not in MONTHS:
            return "bad"
        year, month, day = int(m[3]), MONTHS.index(m[2]) + 1, int(m[1])
        hour, minute, second, nano = int(m[4]), int(m[5]), int(m[6]), 0
        zone = m[7] or ""
        if zone in ("Z", "z"):
            return "bad"
    zone = zone.removeprefix(" ") if len(zone) > 1 else zone
    extra = 0
    if second == 60 and minute == 59:
        second, extra = 59, 1
    try:
        local = dt.datetime(year, month, day, hour, minute, second)  # noqa: DTZ001 - made aware below
    except ValueError:
        return "bad"
    if not 1969 <= year <= 2201:
        return "bad"
    if zone == "":
        aware = local.replace(tzinfo=ZoneInfo(f.timezone))
        offset = aware.utcoffset()
    elif zone in ("Z", "z"):
        offset = dt.timedelta(0)
    elif z := re.fullmatch(r"([+-])([0-9]{2}):?([0-9]{2})", zone):
        if int(z[2]) > 23 or int(z[3]) > 59:
            return "bad"
        offset = dt.timedelta(hours=int(z[2]), minutes=int(z[3])) * (1 if z[1] == "+" else -1)
    else:
        return "bad"
    since = local - offset - dt.datetime(1970, 1, 1)  # noqa: DTZ001
    return in_range((since.days * 86400 + since.seconds + extra) * 10**9 + nano)


# -- CSV


def csv_columns(text: str, delimiter: str):
    columns, field, state = [], "", "start"
    for c in text:
        if state == "start":
            if c == '"':
                state = "quoted"
            elif c == delimiter:
                columns.append("")
            else:
                field, state = c, "plain"
        elif state == "plain":
            if c == '"':
                return None
            if c == delimiter:
                columns.append(field)
                field, state = "", "start"
            else:
                field += c
        elif state == "quoted":
            if c == '"':
                state = "quote"
            else:
                field += c
        elif c == '"':
            field, state = field + '"', "quoted"
        elif c == delimiter:
            columns.append(field)
            field, state = "", "start"
        else:
            return None
    return None if state == "quoted" else [*columns, field]


def csv_fields(f: LineFormat, text: str, header: bytes | None, named: bool):
    columns = csv_columns(text, f.delimiter)
    if columns is None:
        return "not CSV"
    by_number = {i + 1: c for i, c in enumerate(columns)}
    if not named:
        return by_number
    names = csv_columns(header.removeprefix(b"\xef\xbb\xbf").decode().rstrip("\r\n"), f.delimiter)
    if len(names) != len(columns):
        return "wrong number of columns"
    return by_number | dict(zip([n.strip(" \t") for n in names], columns, strict=True))


# -- pairs, combined, pattern


def pairs_fields(text: str):
    pairs, i = {}, 0
    while i < len(text):
        if text[i] in " \t":
            i += 1
            continue
        key = ""
        while i < len(text) and text[i] not in ' \t="':
            key += text[i]
            i += 1
        if i == len(text) or text[i] in " \t":
            continue
        if text[i] == '"':
            return "not key=value pairs"
        i += 1
        value = ""
        if i < len(text) and text[i] == '"':
            i += 1
            while i < len(text) and text[i] != '"':
                if text[i] == "\\":
                    i += 1
                value += text[i : i + 1]
                i += 1
            if i >= len(text):
                return "not key=value pairs"
            i += 1
            if i < len(text) and text[i] not in " \t":
                return "not key=value pairs"
        else:
            while i < len(text) and text[i] not in " \t":
                if text[i] == '"':
                    return "not key=value pairs"
                value += text[i]
                i += 1
        if key:
            pairs[key] = value
    return pairs or "not key=value pairs"


def quoted_at(text: str, i: int):
    """The quoted text that starts at i and the place behind it."""
    if text[i : i + 1] != '"':
        return None
    j = i + 1
    while j < len(text) and text[j] != '"':
        j += 2 if text[j] == "\\" else 1
    return (text[i + 1 : j], j + 1) if j < len(text) else None


def combined_fields(text: str):
    bad = "not a combined log line"
    words = text.split(" ", 3)
    if len(words) < 4 or not all(words[:3]) or any(c in "\t\r\n\x0b\x0c" for w in words[:3] for c in w):
        return bad
    rest = words[3]
    if not rest.startswith("[") or "] " not in rest:
        return bad
    close = rest.index("]")
    if rest[close : close + 2] != "] ":
        return bad
    request = quoted_at(rest, close + 2)
    if request is None:
        return bad
    after = rest[request[1] :].split(" ", 3)
    if len(after) < 3 or after[0] or not re.fullmatch("[0-9]{3}|-", after[1]) or not after[2]:
        return bad
    if any(c in "\t\r\n\x0b\x0c" for c in after[2]):
        return bad
    fields = dict(zip(("host", "ident", "user"), words, strict=False))
    fields |= {"time": rest[1:close], "request": request[0], "status": after[1], "bytes": after[2]}
    if len(after) == 4 and (referer := quoted_at(after[3], 0)) and after[3][referer[1] : referer[1] + 1] == " ":
        agent = quoted_at(after[3], referer[1] + 1)
        if agent and after[3][agent[1] : agent[1] + 1] in ("", " "):
            fields |= {"referer": referer[0], "agent": agent[0]}
    parts = request[0].split(" ")
    if len(parts) == 3:
        fields |= dict(zip(("method", "path", "protocol"), parts, strict=True))
    return {k: v for k, v in fields.items() if v != "-"}


def pattern_fields(f: LineFormat, text: str):
    if len(text) > 2000:
        return "too long for a pattern"
    match = re.search(f.pattern, text)
    if match is None:
        return "pattern does not match"
    numbered = {i: match[i] for i in range(1, (match.re.groups or 0) + 1)}
    return numbered | match.groupdict()
