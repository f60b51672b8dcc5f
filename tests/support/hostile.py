"""A rulebook whose texts try to be something else: markup, formulas, control and direction signs."""

from __future__ import annotations

SCRIPT = "<script>document.title='taken'</script>"
IMAGE = "<img src=x onerror=\"document.title='taken'\">".replace('"', "'")
FORMULA = "=cmd|' /C calc'!A0"
AT = "@SUM(1+1)*cmd|' /C calc'!A0"
CONTROL = "\x1b[2J\x1b]0;taken\x07 \x9b31m \x08\x08\x7f"
TURNED = "\u202etaken\u202c \u2066x\u2069"
MARKDOWN = "| [x](javascript:taken) `code` **bold** \\| <b>"
TITLE = f"{SCRIPT} & \u2028 {CONTROL}"

TEXT = f'''\
rulebook "{TITLE}", draft "{FORMULA}"
result credits [t], rounded down to 1, clause 9
fact depth [m], 0 to 10, clause 2
    "{IMAGE}"
setting margin, 5 % to 20 %, by developer, clause 3
    "{AT}"
judgement near, "{FORMULA}", by verifier, clause 3
    "{TURNED}"
constant factor = 2, clause 3, source "latest {SCRIPT}"
quantity stock [t], clause 4
    "{FORMULA}"
    choice by developer, open each period
        option tabled, error 30 %, cost 0 [USD]
            = 20 [t]
        option plots, error 8 %, cost 5 [USD], only when near
            = 30 [t]
quantity loss [t], clause 5
    "{SCRIPT} {CONTROL} {MARKDOWN}"
    cases
        when depth < 5 [m]
            = 1 [t]
        when depth > 5 [m]
            = 2 [t] * factor
quantity credits [t], clause 9
    "{IMAGE} {TURNED}"
    = stock * (1 - margin) - loss
'''

CASES = f"""\
cases:
  - name: "{SCRIPT.replace('"', "'")} {FORMULA}"
    depth: 3
  - name: "{AT}"
    depth: 8
"""

REASON = f"{FORMULA} {SCRIPT} \x1b[31m\u202e"
"""A decision's reason."""


def obeyed(text: str) -> list[str]:
    """Signs in a text that a terminal might obey or that turn the direction of reading."""
    import unicodedata

    return [sign for sign in text if sign not in "\n\r\t" and unicodedata.category(sign) in ("Cc", "Cf", "Zl", "Zp")]
