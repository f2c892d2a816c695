"""Lines into arrays: bytes in, sizes and times out, every line accounted for. No I/O, no clock."""

from monitor.parse.compile import compile_parser, warm_parsers
from monitor.parse.lines import LineFormat, ParsedLines, Parser

__all__ = ["LineFormat", "ParsedLines", "Parser", "compile_parser", "warm_parsers"]
