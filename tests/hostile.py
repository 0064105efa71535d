r"""Texts that other people may have put anywhere, each aimed at one way of showing it. One list for every door.

`seen` is the judge: nothing hidden may reach a terminal, a screen or a page; line ends are the writer's own.
"""

from __future__ import annotations

from fieldbook.model.visible import is_hidden

TEXTS: dict[str, str] = {
    "colour": "\x1b[31mred\x1b[0m\x07",
    "clear and title": "\x1b[2J\x1b[H\x1b]0;owned\x07",
    "clipboard": "\x1b]52;c;ZXZpbA==\x07",
    "link of a terminal": "\x1b]8;;http://evil.invalid\x1b\\KR-07\x1b]8;;\x1b\\",
    "c1 controls": "\x9b31m\x9d0;owned\x9c\x84\x85",
    "carriage return": "good\rbad \b\b\b\x7f",
    "line ends": "one\ntwo\x0b\x0c\u2028\u2029three",
    "tabs": "a\tb\t",
    "nul": "KR\x0007",
    "direction override": "\u202eKR-70\u202c",
    "isolates": "\u2066KR\u2067-70\u2069\u061c",
    "zero width": "KR\u200b-\u200c\u200d07\u2060\ufeff",
    "soft hyphen": "KR\u00ad-07",
    "tags": "KR-07\U000e0041\U000e0042\U000e007f",
    "fillers": "KR\u3164\u115f\u1160\uffa0-\u280007",
    "variation selectors": "KR\ufe0f\ufe00\U000e0100-07\u034f",
    "annotations": "\ufff9KR\ufffa-07\ufffb",
    "private and unassigned": "\ue000\U000f0000\u0378\U000e0fff",
    "no characters": "\ufffe\uffff\U0010ffff",
    "accents without end": "KR" + "\u0301" * 80,
    "markup": "[bold red]x[/bold red] [@click=app.quit]y[/] [/]",
    "markup link": "[link=file:///etc/passwd]x[/link] :skull: [",
    "html": "<script>alert(1)</script><img src=x onerror=alert(1)>",
    "attribute": '" onload="alert(1)" x=\'',
    "end of data": "</script><!-- ]]> &amp; &#60;b&#62; </title></svg>",
    "template": "$title ${body} {facts} {0} %s %n %(x)s {{x}} \\1",
    "typst code": '#import "x": y #panic() #read("/etc/passwd") // /* */ \\',
    "typst markup": "= head\n[bold] *b* _i_ $x$ `c` @ref <label> ~ -- '",
    "formula": '=HYPERLINK("http://evil.invalid","x")',
    "formula plus": "+1+1",
    "formula minus": "-2+3+cmd|' /C calc'!A0",
    "formula at": "@SUM(1+1)*cmd|' /C calc'!A0",
    "formula wide": "\uff1d1+1",
    "formula with apostrophe": "'=1+1",
    "formula behind blanks": "  =1+1",
    "sql": "x'); DROP TABLE entry; --",
    "quotes": "\"'`\"\"''``",
    "separators": ';,\t|";,',
    "json": '{"a": [1, NaN]}',
    "path up": "../../../etc/passwd",
    "path absolute": "/etc/cron.d/x",
    "path of windows": "..\\..\\C:\\x\\\\host\\share",
    "device": "CON",
    "device with ending": "nul.txt",
    "device with digit": "COM¹",
    "option": "--out=x -rf",
    "dots": "...",
    "ends of names": " KR-07 . ",
    "home": "~root/$HOME/%APPDATA%/`id`/$(id)",
    "url": "file:///etc/passwd?baud=1#x%00%2e%2e",
    "long": "W" * 300,
    "longer": "x y " * 600,
    "wide": "測量點" * 30,
    "other way": "שלום عليكم",
    "empty": "",
    "blanks": " \u00a0\u3000\u2003 ",
    "emoji": "👩‍🔬🏴󠁧󠁢󠁥󠁮󠁧󠁿",
}  # fmt: skip


def hidden_in(text: str) -> list[str]:
    """What of a shown text nobody can see, line ends apart."""
    return [f"U+{ord(letter):04X}" for letter in text if letter != "\n" and is_hidden(letter)]
