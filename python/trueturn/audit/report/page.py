"""report.html: one page that holds everything it shows, without scripts and without anything from elsewhere.

The verdict and the recommendation come first, then the table and the pictures, then what they rest on.
"""

from __future__ import annotations

from collections.abc import Iterable
from html import escape
from importlib import resources
from typing import TYPE_CHECKING

from trueturn.audit.figures import count, plain, upper
from trueturn.audit.report import words
from trueturn.audit.report.document import build_facts
from trueturn.audit.report.pictures import (
    MOST_OBSERVABLES,
    gates_picture,
    shown_observables,
    steps_picture,
    time_picture,
)

if TYPE_CHECKING:
    from trueturn.audit.result import Audit, Row
    from trueturn.operator import Operator

__all__ = [
    "class_of",
    "closing",
    "complete",
    "framed",
    "listing",
    "page",
    "section",
    "small",
    "system_words",
    "verdict",
]

TERMS_SHOWN = 24
POLICY = "default-src 'none'; style-src 'unsafe-inline'"
HEADINGS = (
    ("formula and rule", ""),
    ("steps", "n"),
    ("error", ""),
    ("proven bound", ""),
    ("two-qubit gates", "n"),
    ("depth", "n"),
    ("rotations", "n"),
    ("verdict", ""),
)


def page(audit: Audit) -> str:
    """Write the report.

    Parameters
    ----------
    audit : Audit

    Returns
    -------
    str
        A complete HTML document.
    """
    subtitle = f"Product-formula circuits against a certified reference: {system_words(audit)}."
    return complete(
        audit.title or "Audit",
        subtitle,
        [
            verdict(audit),
            section("Candidates", table(audit)),
            section("Error and cost", trials(audit)),
            section("Over time", over_time(audit)),
            *closing(audit),
        ],
    )


def complete(title: str, subtitle: str, sections: Iterable[str]) -> str:
    """Make a complete HTML document of a title and sections."""
    style = resources.files("trueturn.audit.report").joinpath("page.css").read_text(encoding="utf-8")
    parts = [
        '<!DOCTYPE html>\n<html lang="en">\n<head>\n<meta charset="utf-8"/>',
        '<meta name="viewport" content="width=device-width, initial-scale=1"/>',
        f'<meta http-equiv="Content-Security-Policy" content="{POLICY}"/>',
        f"<title>{escape(title)}</title>\n<style>\n{style}</style>\n</head>\n<body>",
        f"<header>\n<h1>{escape(title)}</h1>",
        f'<p class="sub">{escape(subtitle)}</p>',
        "</header>\n<main>",
        *sections,
        "</main>\n</body>\n</html>\n",
    ]
    return "\n".join(parts)


def closing(audit: Audit) -> list[str]:
    """Write the sections that every report ends with: what it rests on, and what is needed to make it again."""
    return [
        section("What the verdict rests on", grounds(audit)),
        section("Reference and certificate", certificate(audit)),
        section("Inputs", inputs(audit)),
        section("Made with", made_with(audit)),
    ]


def section(heading: str, body: str) -> str:
    """Put a heading over a body."""
    return f"<section>\n<h2>{escape(heading)}</h2>\n{body}\n</section>"


def system_words(audit: Audit) -> str:
    """Say how large the system is."""
    terms = len(words.operator_lines(audit.operator))
    return f"{audit.operator.qubits} qubits, {count(terms)} terms"


def verdict(audit: Audit, headline: str | None = None) -> str:
    """Write the answer; `headline` stands for the one of an audit."""
    return (
        f'<div class="verdict {escape(audit.verdict)}">\n'
        f"<p><strong>{escape(audit.verdict)}</strong> – {escape(headline or words.headline(audit))}.</p>\n"
        f'<p class="run">{escape(words.recommendation(audit))}</p>\n'
        f'<p class="small">{escape(words.HARDWARE)}</p>\n</div>'
    )


def table(audit: Audit) -> str:
    """Write one candidate a row."""
    head = "".join(f'<th scope="col"{class_of(kind)}>{heading}</th>' for heading, kind in HEADINGS)
    sources = list(dict.fromkeys(row.bound_source for row in audit.rows))
    rows = "\n".join(row_cells(row, audit, sources) for row in audit.rows)
    listed = "".join(f"<li>{escape(source)}</li>" for source in sources)
    return (
        f'{framed(head, rows)}\n<ol class="small">{listed}</ol>\n'
        '<p class="small">An error is the interval that holds the true error: one figure where its '
        "ends agree to all digits shown. Cost counts 2(w−1) two-qubit gates for a rotation of weight w, and of a file its own; "
        "depth counts two-qubit gates in sequence.</p>"
    )


def framed(head: str, rows: str) -> str:
    """Put heading cells and rows into a table that scrolls sideways where it must."""
    return f'<div class="scroll">\n<table>\n<thead><tr>{head}</tr></thead>\n<tbody>\n{rows}\n</tbody>\n</table>\n</div>'


def class_of(kind: str) -> str:
    """Write a class attribute, or nothing."""
    return f' class="{kind}"' if kind else ""


def row_cells(row: Row, audit: Audit, sources: list[str]) -> str:
    """Write the cells of one candidate."""
    place = words.worst_words(row, audit)
    cells = [
        f"<td>{escape(row.candidate.name)}{small(row.candidate.rule_words, row.note)}</td>",
        f'<td class="n">{escape(words.steps_words(row))}{small(row.candidate.steps_words)}</td>',
        f'<td class="e">{escape(words.error_words(row, audit))}{small(place)}</td>',
        f"<td>{escape(words.bound_words(row))}<sup>[{sources.index(row.bound_source) + 1}]</sup></td>",
        f'<td class="n">{words.cost_words(row.two_qubit_gates)}</td>',
        f'<td class="n">{words.cost_words(row.depth)}</td>',
        f'<td class="n">{words.cost_words(row.rotations)}</td>',
        f'<td class="v {escape(row.verdict)}">{escape(row.verdict)}</td>',
    ]
    return f"<tr{class_of('chosen' if row is audit.recommended else '')}>{''.join(cells)}</tr>"


def small(*texts: str) -> str:
    """Write further lines of a cell."""
    return "".join(f'<span class="small">{escape(text)}</span>' for text in texts if text)


def trials(audit: Audit) -> str:
    """Draw error against steps and against gates."""
    figures = "\n".join(f"<figure>{picture(audit)}</figure>" for picture in (steps_picture, gates_picture))
    return (
        f'<div class="pair">\n{figures}\n</div>\n'
        '<p class="small">Full markers are the rows of the table, open ones the other step counts '
        "that were run; bars are intervals.</p>"
    )


def over_time(audit: Audit) -> str:
    """Draw the figures over time."""
    if audit.quantity != "observables":
        caption = f"{audit.quantity.capitalize()} error at the requested times, with the tolerance as a broken line."
    else:
        caption = (
            "Above: the reference as a line, with its certified band (often thinner than the line), and each "
            "candidate. Below: candidate less reference; the shaded strip is the tolerance, linear inside "
            "and logarithmic outside. Lines join the requested times and say nothing about the times between."
        )
        if len(shown_observables(audit)) < len(audit.observables):
            caption += (
                f" Of {len(audit.observables)} observables the {MOST_OBSERVABLES} with the largest errors "
                "are drawn; audit.json holds all."
            )
    return f"<figure>{time_picture(audit)}<figcaption>{caption}</figcaption></figure>"


def grounds(audit: Audit) -> str:
    """Write what was assumed, proven, measured, and what to mind."""
    groups = (
        ("Assumed", audit.assumptions),
        ("Proven", audit.proven),
        ("Measured only", audit.measured),
        ("To mind", audit.cautions),
    )
    return "\n".join(f"<h3>{name}</h3>\n{listing(sentences)}" for name, sentences in groups if sentences)


def listing(sentences: Iterable[str]) -> str:
    """Write sentences as a list."""
    return "<ul>\n" + "\n".join(f"<li>{escape(sentence)}</li>" for sentence in sentences) + "\n</ul>"


def certificate(audit: Audit) -> str:
    """Write the reference's certificate and values."""
    reference, proof = audit.reference, audit.reference.certificate
    names_shown = list(reference.expectations)
    head = "".join(
        f'<th scope="col" class="n">{escape(name)}</th>'
        for name in ("time", "state error ≤", "truncation", "rounding", *names_shown)
    )
    lines = []
    for index, time in enumerate(reference.times):
        bounds = (proof.error_bound[time], proof.truncation[time], proof.rounding[time])
        cells = [plain(float(time)), *(upper(float(value)) for value in bounds)]
        cells += [words.value_words(float(reference.expectations[name][index])) for name in names_shown]
        lines.append("<tr>" + "".join(f'<td class="n">{escape(cell)}</td>' for cell in cells) + "</tr>")
    body = "\n".join(lines)
    route = f"Spectral interval: {proof.spectral_route}." if proof.spectral_route else ""
    return (
        f"<p>{escape(words.certificate_line(audit))} {escape(route)}</p>\n"
        + framed(head, body)
        + (listing(proof.notes) if proof.notes else "")
    )


def inputs(audit: Audit) -> str:
    """Write what is needed to run the audit again."""
    unit = f" (energies in {audit.energy_unit}, ħ = 1)" if audit.energy_unit else " (ħ = 1)"
    readout = {"along": "along one circuit", "separate": "a circuit for each time"}[audit.readout]
    facts = [
        ("start", audit.start),
        ("times", ", ".join(plain(time) for time in audit.times) + unit),
        ("readout", readout),
        ("asked", words.tolerance_words(audit)),
    ]
    for row in audit.rows:
        facts.append(("candidate", f"{row.label}, steps: {words.asked_words(row)}"))
    operators = [("Hamiltonian", audit.operator), *audit.observables.items()]
    blocks = "\n".join(
        f'<p class="small">{escape(name)}</p>\n<pre class="terms">{escape(shown_terms(operator))}</pre>'
        for name, operator in operators
    )
    return definitions(facts) + "\n" + blocks + '\n<p class="small">audit.json holds every term and figure.</p>'


def shown_terms(operator: Operator) -> str:
    """Write the first terms of an operator, one a line."""
    return "\n".join(words.operator_lines(operator, TERMS_SHOWN))


def made_with(audit: Audit) -> str:
    """Write versions and times."""
    spent = [(f"seconds, {stage}", f"{value:.2f}") for stage, value in audit.seconds.items()]
    return definitions([*build_facts().items(), *spent])


def definitions(facts: Iterable[tuple[str, str]]) -> str:
    """Write names and values in two columns."""
    return "<dl>\n" + "\n".join(f"<dt>{escape(key)}</dt><dd>{escape(value)}</dd>" for key, value in facts) + "\n</dl>"
