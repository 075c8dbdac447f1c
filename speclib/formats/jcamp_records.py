"""JCAMP-DX text as labelled records and nested blocks, before anything is known of their meaning.

Rules: McDonald & Wilks, Appl. Spectrosc. 1988, 42, 151 (JCAMP-DX 4.24): a record runs from `##LABEL=` to the next `##`;
labels are compared in capitals without blanks, `-`, `/`, `_`; `$$` begins a comment anywhere; `##TITLE=` opens a block
and `##END=` closes it; blocks nest. Blanks before `##` occur in real files and are accepted.
"""

from __future__ import annotations

import re
from collections.abc import Iterator
from dataclasses import dataclass, field

from speclib.formats.text_document import TextDocument, shown, shown_name

MAX_DEPTH = 20
MAX_BLOCKS = 20_000
MAX_LABEL = 200
"""Characters of a label."""
_DELETED = str.maketrans("", "", " \t-/_")
_TITLE = re.compile(r"[ \t]*##[ \t]*TITLE[ \t]*=", re.IGNORECASE)
_LABEL = re.compile(r"[ \t]*##[ \t]*[A-Za-z.$][^=:#]{0,80}=")
_AGAIN = "get the file again from its source; it may be cut off or edited"


@dataclass(frozen=True)
class Comment:
    """A `$$` comment, or the body of an empty label `##=`."""

    line: int
    text: str


@dataclass
class Record:
    """A labelled record: label as compared, label as written, body lines without comments, with their line numbers.

    `derived` marks a record that does not stand in the file so, but follows from another (a list of NTUPLES).
    """

    line: int
    label: str
    name: str
    body: list[tuple[int, str]] = field(default_factory=list)
    derived: bool = False

    @property
    def heading(self) -> str:
        """The label as a message shows it: `##LABEL=`, shortened, nothing unprintable."""
        return f"##{shown_name(self.name[:40])}="

    @property
    def value(self) -> str:
        """The body as text, without blanks at both ends."""
        return "\n".join(text.strip() for _, text in self.body).strip()

    @property
    def unfolded(self) -> str:
        """The value with folded lines joined: an equals sign at the end of a line says that the next continues it."""
        return self.value.replace("=\n", "")


@dataclass
class Block:
    """What stands between a `##TITLE=` and its `##END=`, in order; `children` are the blocks inside."""

    line: int
    records: list[Record] = field(default_factory=list)
    comments: list[Comment] = field(default_factory=list)
    children: list[Block] = field(default_factory=list)

    def find(self, *labels: str) -> Record | None:
        """The first record with one of the labels, tried in order."""
        return next((r for label in labels for r in self.records if r.label == label), None)

    def value(self, *labels: str) -> str:
        """The value of `find`, or ""."""
        record = self.find(*labels)
        return record.value if record else ""


def normalised_label(name: str) -> str:
    """A label as labels are compared."""
    return name.translate(_DELETED).upper()


def is_jcamp(document: TextDocument) -> bool:
    """Whether a text is JCAMP-DX: its first written line is a labelled record, or some line opens a block."""
    first = next((line for line in document.lines if line.strip() and not line.lstrip().startswith("$$")), "")
    return _LABEL.match(first) is not None or any("##" in line and _TITLE.match(line) for line in document.lines)


def _items(document: TextDocument) -> Iterator[Record | Comment]:
    """Records in order, and comments; a comment comes before the record beside or below which it stands."""
    record: Record | None = None
    for number, line in enumerate(document.lines, start=1):
        text, mark, comment = line.partition("$$")
        labelled = text.lstrip().startswith("##")
        if labelled and record is not None:
            yield record
        if mark:
            yield Comment(number, comment.strip())
        if not labelled:
            if record is not None:
                record.body.append((number, text))
            elif text.strip():
                raise document.error(
                    f"{shown(text)} stands before the first labelled record",
                    line=number,
                    advice="a JCAMP-DX file begins with ##TITLE=",
                )
            continue
        name, equals, value = text.lstrip()[2:].partition("=")
        if not equals:
            raise document.error(
                f"the labelled record {shown(text.strip())} has no equals sign", line=number, advice=_AGAIN
            )
        if len(name) > MAX_LABEL:
            raise document.error(f"the label {shown(name)} is too long", line=number, advice=_AGAIN)
        record = Record(number, normalised_label(name), name.strip(), [(number, value)])
    if record is not None:
        yield record


def read_blocks(document: TextDocument) -> list[Block]:
    """The blocks at the top of a file, each with its records, comments and inner blocks.

    Raises:
        InputFileError: records outside a block, a block that is not closed, an `##END=` too many, nesting too deep.
    """
    done: list[Block] = []
    stack: list[Block] = []
    waiting: list[Comment] = []
    count = 0
    for item in _items(document):
        if isinstance(item, Comment):
            (stack[-1].comments if stack else waiting).append(item)
        elif item.label == "TITLE":
            count += 1
            if count > MAX_BLOCKS:
                raise document.error(f"more than {MAX_BLOCKS} blocks", line=item.line, advice="split the file")
            _open(document, item, stack, done, waiting)
        elif item.label == "":
            if item.value:
                (stack[-1].comments if stack else waiting).append(Comment(item.line, item.value))
        elif not stack:
            what = "closes no block" if item.label == "END" else "stands outside a block"
            raise document.error(
                f"{item.heading} {what}", line=item.line, advice="a block runs from ##TITLE= to ##END=; " + _AGAIN
            )
        elif item.label == "END":
            stack.pop()
            _refuse_stray_text(document, item)
        else:
            stack[-1].records.append(item)
    if stack:
        raise document.error(
            f"the block that begins in line {stack[-1].line} has no ##END=",
            place=f"line {len(document.lines)}",
            advice=_AGAIN,
        )
    if waiting and done:
        done[-1].comments += waiting
    return done


def _open(document: TextDocument, title: Record, stack: list[Block], done: list[Block], waiting: list[Comment]) -> None:
    if stack and normalised_label(stack[-1].value("DATATYPE")) != "LINK":
        raise document.error(
            f"##TITLE= begins a block inside that of line {stack[-1].line}, which has no ##END= and is no LINK",
            line=title.line,
            advice=_AGAIN,
        )
    if len(stack) >= MAX_DEPTH:
        raise document.error(f"blocks are nested more than {MAX_DEPTH} deep", line=title.line, advice=_AGAIN)
    block = Block(title.line, [title], list(waiting))
    waiting.clear()
    (stack[-1].children if stack else done).append(block)
    stack.append(block)


def _refuse_stray_text(document: TextDocument, end: Record) -> None:
    for number, text in end.body[1:]:
        if text.strip():
            raise document.error(f"{shown(text.strip())} stands behind ##END=", line=number, advice=_AGAIN)
