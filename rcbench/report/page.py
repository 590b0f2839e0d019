"""The layouts of `reports/` and how what comes from files is escaped in each of them."""

from __future__ import annotations

import re
from collections.abc import Mapping
from typing import Any

import jinja2
from markupsafe import Markup

from rcbench.errors import InputError
from rcbench.files import shipped

_TEX = {
    "\\": r"\textbackslash{}", "{": r"\{", "}": r"\}", "&": r"\&", "%": r"\%", "$": r"\$", "#": r"\#", "_": r"\_",
    "~": r"\textasciitilde{}", "^": r"\textasciicircum{}", "<": r"\textless{}", ">": r"\textgreater{}",
    "|": r"\textbar{}", '"': "''", "±": r"$\pm$", "−": "$-$", "–": "--", "≈": r"$\approx$", "≠": r"$\neq$",
    "≤": r"$\leq$", "≥": r"$\geq$", "µ": r"\textmu{}", "·": r"$\cdot$", "×": r"$\times$", "…": r"\dots{}",
    "\u202f": r"\,", "\u00a0": "~",
}  # fmt: skip
_MARKDOWN = re.compile(r"([\\`*_\[\]{}|#~^$])")


def tex(text: object) -> Markup:
    """Text for LaTeX: every character that LaTeX reads as a command is escaped, line breaks become spaces."""
    return Markup(" ".join("".join(_TEX.get(sign, sign) for sign in str(text)).splitlines()))


def markdown(text: object) -> Markup:
    """Text for Markdown: its marks and those of HTML are escaped, line breaks become spaces."""
    plain = " ".join(str(text).splitlines())
    return Markup(_MARKDOWN.sub(r"\\\1", plain.replace("&", "&amp;").replace("<", "&lt;").replace(">", "&gt;")))


def render(name: str, context: Mapping[str, Any]) -> str:
    """Fill a layout of `reports/`. Every value is escaped for HTML, Markdown or LaTeX, by the ending before `.jinja`.

    Raises:
        InputError: the layout is missing or is no Jinja2 layout (users edit them).
    """
    folder = shipped("reports")
    kind = name.split(".")[-2]
    environment = jinja2.Environment(
        loader=jinja2.FileSystemLoader(folder),
        autoescape=True,  # what a macro gives is escaped already, and is marked so
        finalize={"md": _finalize(markdown), "tex": _finalize(tex)}.get(kind),
        undefined=jinja2.StrictUndefined,
        trim_blocks=True,
        lstrip_blocks=True,
        keep_trailing_newline=True,
        **(_TEX_DELIMITERS if kind == "tex" else {}),
    )
    try:
        return environment.get_template(name).render(**context)
    except jinja2.TemplateNotFound as error:
        raise InputError("layout", str(folder / str(error.name)), "a layout of the reports folder") from None
    except jinja2.TemplateSyntaxError as error:
        raise InputError("layout", error.message, "a Jinja2 layout", f"{error.name}:{error.lineno}: ") from None
    except jinja2.UndefinedError as error:
        raise InputError("layout", error.message, "names that the report gives to its layouts", f"{name}: ") from None


_TEX_DELIMITERS: dict[str, Any] = {  # LaTeX has its own use for braces and per cent signs
    "block_start_string": "<%", "block_end_string": "%>", "variable_start_string": "<<", "variable_end_string": ">>",
    "comment_start_string": "<#", "comment_end_string": "#>",
}  # fmt: skip


def _finalize(escape: Any) -> Any:
    def finalize(value: object) -> object:
        return value if isinstance(value, Markup) else escape(value)

    return finalize


def inline(svg: str) -> Markup:
    """A figure's own SVG, which needs no escaping: matplotlib has escaped its text."""
    return Markup(svg)
