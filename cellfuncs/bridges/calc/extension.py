"""Writes the extension that puts functions into LibreOffice Calc: one function a part of the file.

The parts of an .oxt: META-INF/manifest.xml says what the others are, description.xml names and
numbers the extension, types.idl declares each function to LibreOffice, CalcAddIns.xcu is what the
function wizard shows, component.py answers, functions.json is what component.py must know.
"""

import json
import sys
import sysconfig
import zipfile
from collections.abc import Iterable
from dataclasses import dataclass, field
from importlib.resources import files
from importlib.util import find_spec
from pathlib import Path
from xml.sax.saxutils import escape, quoteattr

from cellfuncs.arguments import WholeRange
from cellfuncs.catalogue import CATALOGUE, Argument, Function, Number, Numeric, Truth, result_phrase
from cellfuncs.families.sky import Moment
from cellfuncs.version import __version__

IDENTIFIER = "org.cellfuncs.calc"
VARIADIC = 8
"""How many values a function takes that takes any number: a declaration must have an end"""

# A package installed from a copy of the source has no number that LibreOffice could compare.
VERSION = __version__ if __version__[0].isdigit() and "unknown" not in __version__ else "0"


@dataclass(frozen=True, kw_only=True)
class Extension:
    """An extension: what is in it, and how it finds the environment that answers.

    `in_process` False leaves the answering to the worker even where LibreOffice's Python could do
    it, as it must be on machines where LibreOffice has a Python of its own.
    """

    identifier: str = IDENTIFIER
    title: str = "cellfuncs"
    version: str = VERSION
    functions: tuple[Function, ...] = field(default_factory=lambda: tuple(CATALOGUE.values()))
    module: str = "cellfuncs.bridges.cell"
    """Where `answer(name, arguments)` is"""
    python: str = sys.executable
    paths: tuple[str, ...] = field(default_factory=lambda: environment())
    in_process: bool = True

    @property
    def interface(self) -> str:
        return f"{self.identifier}.XFunctions"


def environment() -> tuple[str, ...]:
    """Return the folders from which this Python imports the package and what it needs."""
    found = [sysconfig.get_path("purelib"), sysconfig.get_path("platlib")]
    for name in ("cellfuncs", "numpy", "astropy"):
        spec = find_spec(name)
        if spec is not None and spec.origin is not None:
            found.append(str(Path(spec.origin).parents[1]))
    return tuple(dict.fromkeys(found))


def build(extension: Extension, path: Path) -> None:
    """Write the .oxt."""
    here = files("cellfuncs.bridges")
    parts = {
        "META-INF/manifest.xml": manifest(),
        "description.xml": description(extension),
        "types.idl": types(extension),
        "CalcAddIns.xcu": wizard(extension),
        "functions.json": settings(extension),
        "component.py": here.joinpath("calc", "component.py").read_text(encoding="utf-8"),
        "pythonpath/cellfuncs_emptiness.py": here.joinpath("calc", "emptiness.py").read_text(
            encoding="utf-8"
        ),
        "pythonpath/cellfuncs_worker.py": here.joinpath("worker.py").read_text(encoding="utf-8"),
    }
    with zipfile.ZipFile(path, "w", zipfile.ZIP_DEFLATED) as archive:
        for name, text in parts.items():
            archive.writestr(name, text)


def parameters(function: Function) -> list[tuple[Argument, str]]:
    """Return each argument with the name that the wizard shows."""
    if not function.variadic:
        return [(argument, argument.name) for argument in function.arguments]
    *fixed, rest = function.arguments
    return [(argument, argument.name) for argument in fixed] + [
        (rest, f"argument_{number}") for number in range(1, VARIADIC + 1)
    ]


def manifest() -> str:
    entries = {
        "types.idl": "application/vnd.sun.star.uno-typelibrary;type=RDB",
        "component.py": "application/vnd.sun.star.uno-component;type=Python",
        "CalcAddIns.xcu": "application/vnd.sun.star.configuration-data",
    }
    lines = "".join(
        f' <manifest:file-entry manifest:media-type="{kind}" manifest:full-path="{name}"/>\n'
        for name, kind in entries.items()
    )
    return (
        '<?xml version="1.0" encoding="UTF-8"?>\n'
        '<manifest:manifest xmlns:manifest="http://openoffice.org/2001/manifest">\n'
        f"{lines}</manifest:manifest>\n"
    )


def description(extension: Extension) -> str:
    return (
        '<?xml version="1.0" encoding="UTF-8"?>\n'
        '<description xmlns="http://openoffice.org/extensions/description/2006">\n'
        f" <identifier value={quoteattr(extension.identifier)}/>\n"
        f" <version value={quoteattr(extension.version)}/>\n"
        f' <display-name><name lang="en">{escape(extension.title)}</name></display-name>\n'
        "</description>\n"
    )


def types(extension: Extension) -> str:
    """Return the interface in UNO's own language.

    An `any` takes a number, a text, a range or nothing. What comes back is always a table of
    cells, mostly of one: Calc takes nothing else from an array formula. Where a function takes a
    moment, Calc hands the document over too, which says from which day it counts the dates.
    """
    modules = extension.identifier.split(".")
    document = ["[in] com::sun::star::beans::XPropertySet document"]
    lines = [
        f" sequence< sequence< any > > {function.name}("
        + ", ".join(
            (document if _moments(function) else [])
            + [f"[in] any p{number:02}" for number, _ in enumerate(parameters(function))]
        )
        + ");"
        for function in extension.functions
    ]
    return "\n".join(
        [
            *(f"module {module} {{" for module in modules),
            "interface XFunctions {",
            *lines,
            "};",
            *("};" for _ in modules),
            "",
        ]
    )


def wizard(extension: Extension) -> str:
    """Return names and help for the function wizard; it finds an argument by its name in types.idl.

    The compatibility name is what an .xlsx holds; the name with the identifier stands in an .ods.
    """
    return (
        '<?xml version="1.0" encoding="UTF-8"?>\n'
        '<oor:component-data xmlns:oor="http://openoffice.org/2001/registry"'
        ' xmlns:xs="http://www.w3.org/2001/XMLSchema"'
        ' oor:name="CalcAddIns" oor:package="org.openoffice.Office">\n'
        f'<node oor:name="AddInInfo"><node oor:name={quoteattr(extension.identifier)}'
        ' oor:op="replace"><node oor:name="AddInFunctions">\n'
        + "".join(_wizard_entry(function) for function in extension.functions)
        + "</node></node></node>\n</oor:component-data>\n"
    )


def _wizard_entry(function: Function) -> str:
    help_lines = "".join(
        f'<node oor:name="p{number:02}" oor:op="replace">'
        + _property("DisplayName", name)
        + _property("Description", _argument_help(argument))
        + "</node>\n"
        for number, (argument, name) in enumerate(parameters(function))
    )
    return (
        f'<node oor:name="{function.name}" oor:op="replace">\n'
        + _property("DisplayName", function.name)
        + _property("Description", _help(function))
        + '<prop oor:name="Category"><value>Add-In</value></prop>\n'
        + _property("CompatibilityName", function.name)
        + f'<node oor:name="Parameters">\n{help_lines}</node></node>\n'
    )


def _help(function: Function) -> str:
    caution = f" {function.caution}" if function.caution else ""
    return f"{function.summary}{caution} Gives {result_phrase(function)}. ({function.family})"


def _argument_help(argument: Argument) -> str:
    unit = argument.unit if isinstance(argument, Number) else ""
    sentence = argument.meaning + (f" [{unit}]" if unit else "") + f"; {argument.allowed}"
    if argument.optional:
        return f"{sentence}; left out: {argument.default_text}"
    return sentence


def _property(name: str, text: str) -> str:
    # what is said in en-US is shown in every other language that nothing is said in
    return f'<prop oor:name="{name}"><value xml:lang="en-US">{escape(text)}</value></prop>\n'


def settings(extension: Extension) -> str:
    """Return what component.py reads."""
    found = {
        "identifier": extension.identifier,
        "interface": extension.interface,
        "module": extension.module,
        "python": extension.python,
        "version": list(sys.version_info[:2]),
        "paths": list(extension.paths),
        "in_process": extension.in_process,
        "functions": [
            {
                "name": function.name,
                "moments": _moments(function),
                "words": [] if function.variadic else _words(function.arguments),
                "required": [
                    position
                    for position, argument in enumerate(function.arguments)
                    if not argument.optional
                ],
            }
            for function in extension.functions
        ],
    }
    return json.dumps(found, indent=1) + "\n"


def _moments(function: Function) -> list[int]:
    """Return the positions of the arguments that are moments."""
    return [
        position
        for position, argument in enumerate(function.arguments)
        if isinstance(argument, Moment)
    ]


def _words(arguments: Iterable[Argument]) -> list[int]:
    return [
        position
        for position, argument in enumerate(arguments)
        if not isinstance(argument, (Numeric, Truth, WholeRange))
    ]
