"""Names and remarks that would do harm somewhere: on a terminal, in markup, in HTML, in a spreadsheet, as a path."""

from __future__ import annotations

TEXTS = {
    "markup": "[/nope] [bold red]x[/] [link=file:///etc]y[/link]",
    "html": "<script>alert(1)</script><img src=x onerror=alert(2)>&amp;\"'</svg>",
    "formula": "=cmd|'/c calc'!A1",
    "formula-plus": "+1+cmd()",
    "formula-at": "@SUM(A1:A9)",
    "path": "../../../tmp/x",
    "path-windows": "..\\..\\x",
    "right-to-left": "abc\u202egpj.exe\u2066",
    "emoji": "\U0001f525\U0001f468\u200d\U0001f469\u200d\U0001f467 caf\u0301",
    "mathtext": "$\\frac{a}{0}$ $x_{ \\badmacro ^2$ 100 % #",
    "braces": "{0} {name!r} %s %(x)d {",
    "long": "x" * 10_000,
    "xml": "]]> --> <!-- <?xml <![CDATA[",
    "quotes": "\"; drop table shots; -- ' ` $(reboot)",
}
# What no file that people write may hold; scope files and other systems may bring it all the same.
CONTROLS = {
    "escape": "a\x1b[31mred\x1b[2J\x1b]0;title\x07",
    "nul": "a\x00b",
    "returns": "a\rshpb: ACCEPT\nb\tc",
    "delete": "a\x7f\x9bb",
}
