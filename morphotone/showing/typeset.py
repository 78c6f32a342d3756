"""Tables and paragraphs of a paper as Markdown and as LaTeX."""

from collections.abc import Callable, Sequence

from morphotone.showing.markup import latex, markdown, one_line
from morphotone.showing.paper import PaperTable
from morphotone.showing.references import split_citations

#: Headings and their paragraphs.
Paragraphs = dict[str, str]

_PREAMBLE = (
    "% \\usepackage{booktabs,longtable}, and textcomp with a LaTeX older than 2020; UTF-8.\n"
    "% Names with letters beyond Latin and Greek need an engine that knows them.\n"
)
_FOR_AUTHORS = "For the authors, not for print:"
_ROWS_OF_A_PAGE = 50  # of small type; a longer table runs on


def tables_markdown(tables: Sequence[PaperTable]) -> str:
    """Return tables in Markdown, each with its caption above and its notes below."""
    return "\n".join(_table_markdown(table, number) for number, table in enumerate(tables, 1))


def tables_latex(tables: Sequence[PaperTable]) -> str:
    """Return tables to be put into a LaTeX document, with the packages they need in the first lines."""
    return _PREAMBLE + "\n".join(map(_table_latex, tables))


def paragraphs_markdown(paragraphs: Paragraphs, remarks: Sequence[str] = ()) -> str:
    """Return paragraphs in Markdown, citations as [@key]; remarks for the authors follow below a line."""
    told = "\n".join(f"**{markdown(head)}.** {_cited_markdown(text)}\n" for head, text in paragraphs.items())
    listed = "".join(f"- {markdown(remark)}\n" for remark in remarks)
    return f"{told}\n---\n\n{_FOR_AUTHORS}\n\n{listed}" if remarks else told


def paragraphs_latex(paragraphs: Paragraphs, remarks: Sequence[str] = ()) -> str:
    """Return paragraphs to be put into a LaTeX document, with citations; the remarks are comments."""
    told = "\n".join(
        f"\\paragraph{{{latex(head)}.}} {_cited_latex(text)}\n" for head, text in paragraphs.items()
    )
    listed = "".join(f"% - {one_line(remark)}\n" for remark in remarks)
    return f"% {_FOR_AUTHORS}\n{listed}{told}" if remarks else told


def _cited_markdown(text: str) -> str:
    def citation(keys: Sequence[str]) -> str:
        return f"[{'; '.join(f'@{key}' for key in keys)}]"

    return _cited(text, markdown, citation)


def _cited_latex(text: str) -> str:
    return _cited(text, latex, lambda keys: f"\\cite{{{','.join(keys)}}}").replace(" \\cite", "~\\cite")


def _cited(text: str, escape: Callable[[str], str], citation: Callable[[Sequence[str]], str]) -> str:
    return "".join(escape(part) + (citation(keys) if keys else "") for part, keys in split_citations(text))


def _table_markdown(table: PaperTable, number: int) -> str:
    def line(fields: Sequence[str]) -> str:
        return f"| {' | '.join(map(markdown, fields))} |\n"

    rule = "".join("|---" if at < table.words else "|---:" for at in range(len(table.header)))
    notes = "".join(f"\n{markdown(note)}\n" for note in table.notes)
    return (
        f"**Table {number}.** {markdown(table.caption)}\n\n"
        f"{line(table.header)}{rule}|\n{''.join(map(line, table.rows))}{notes}"
    )


def _table_latex(table: PaperTable) -> str:
    blocks = any(not row[0] for row in table.rows)
    header = table.header[1:] if blocks else table.header
    rows = _blocks_latex(table.rows) if blocks else [_row_latex(row) for row in table.rows]
    words = table.words - (len(table.header) - len(header))
    columns = "l" * words + "r" * (len(header) - words)
    caption = f"\\caption{{{latex(table.caption)}}}\\label{{tab:{table.name}}}"
    head = f"\\toprule\n{_row_latex(header)}\\midrule\n"
    body = f"{''.join(rows)}\\bottomrule\n"
    notes = "".join(f"\n{latex(note)}\\par" for note in table.notes)
    if len(rows) > _ROWS_OF_A_PAGE:
        first = f"{caption}\\\\\n{head}\\endfirsthead\n{head}\\endhead\n"
        long = f"\\begin{{longtable}}{{{columns}}}\n{first}{body}\\end{{longtable}}"
        return f"{{\\footnotesize\n{long}{notes}\n}}\n"
    tabular = f"\\begin{{tabular}}{{{columns}}}\n{head}{body}\\end{{tabular}}\\par\\medskip\\raggedright"
    return (
        f"\\begin{{table}}\n\\centering\\footnotesize\n{caption}\\medskip\n{tabular}{notes}\n\\end{{table}}\n"
    )


def _blocks_latex(rows: Sequence[Sequence[str]]) -> list[str]:
    """Return rows whose first field, where it is not empty, is a heading of its own across the page."""
    done: list[str] = []
    for first, *fields in rows:
        if first:
            space = "\\addlinespace\n" if done else ""
            done.append(f"{space}\\multicolumn{{{len(fields)}}}{{l}}{{{latex(first)}}} \\\\\n")
        done.append(f"\\quad {_row_latex(fields)}")
    return done


def _row_latex(fields: Sequence[str]) -> str:
    return f"{' & '.join(map(latex, fields))} \\\\\n"
