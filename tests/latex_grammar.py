"""A small grammar of LaTeX tables, for places without LaTeX: what is wrong with a file."""

from __future__ import annotations

import re

KNOWN = set(
    r"""begin end centering footnotesize setlength tabcolsep caption label toprule midrule
    bottomrule par medskip smallskip noindent raggedright arraybackslash linewidth multicolumn
    thetable endfirsthead endhead endfoot begingroup endgroup allowbreak pm times mathrm varpi
    textbackslash textasciicircum textasciitilde textless textgreater textbar textasciigrave
    tau mu kappa Delta alpha beta gamma sigma circ rightarrow delta
    i j c u v H epsilon zeta eta theta
    iota lambda nu xi pi rho o O ss ae AE aa AA l L scriptsize tiny""".split()
)
_TOKEN = re.compile(r"\\[A-Za-z]+|\\.|[{}$&%#_^~]|[^\\{}$&%#_^~]+", re.DOTALL)


def faults(source: str) -> list[str]:
    """Everything that LaTeX would stumble over, or that would do more than print."""
    found = [f"not ASCII: {letter!r}" for letter in source if not letter.isascii()]
    lines = [line for line in source.split("\n") if not line.startswith("%")]
    body = re.sub(r"\\label\{[\w:]*\}", "", "\n".join(lines))
    depth, math = 0, False
    for token in _TOKEN.findall(body):
        if token == "{":
            depth += 1
        elif token == "}":
            depth -= 1
        elif token == "$":
            math = not math
        elif token in ("%", "#", "~") or (token in ("_", "^") and not math):
            found.append(f"a bare {token}")
        elif re.fullmatch(r"\\[A-Za-z]+", token) and token[1:] not in KNOWN:
            found.append(f"an unknown command {token}")
        if depth < 0:
            found.append("a closing brace too many")
            break
    found += ["braces do not match"] if depth else []
    found += ["an odd number of $"] if math else []
    return found + _environments(body) + _rows(body)


def _environments(body: str) -> list[str]:
    open_: list[str] = []
    for kind, name in re.findall(r"\\(begin|end)\{(\w+)\}", body):
        if kind == "begin":
            open_.append(name)
        elif not open_ or open_.pop() != name:
            return [f"\\end{{{name}}} without its beginning"]
    return [f"{name} is not ended" for name in open_]


def _rows(body: str) -> list[str]:
    """Every row of a tabular has the columns that its preamble says."""
    found = []
    pattern = r"\\begin\{(tabular|longtable)\}\{@\{\}(.*?)@\{\}\}\n(.*?)\\end\{\1\}"
    for _, columns, inside in re.findall(pattern, body, re.DOTALL):
        plain = re.sub(r">\{[^}]*\}", "", re.sub(r"p\{[^}]*\}", "p", columns))
        for line in inside.split("\n"):
            if line.endswith(r"\\") and "&" in line:
                count = len(re.findall(r"(?<!\\)&", line)) + 1
                if count != len(plain):
                    found.append(f"{count} cells in {len(plain)} columns: {line[:60]}")
    return found
