"""Parts 14 to 16 of the page: conclusions, files with their hashes and how to run them again, limits and cautions."""

from __future__ import annotations

from collections.abc import Iterator

from adjust.record.page_blocks import Block, Cell, Commands, Grid, Items, Row, Words, columns, facts, name_cell
from adjust.record.page_cover import supplied
from adjust.record.page_view import View, inputs_hash
from adjust.record.shown import plain


def conclusions(view: View) -> Iterator[Block]:
    """What the surveyor concludes."""
    yield supplied(view, ("conclusions",))


def files(view: View) -> Iterator[Block]:
    """Inputs with their hashes, versions, the files beside this page, and how to make them again."""
    t, record = view.texts, view.record
    rows = tuple(Row((name_cell(one["file"]), Cell(one["sha256"], kind="code"))) for one in record["job"]["inputs"])
    yield Grid("inputs", t("caption.inputs"), columns(t, "head", [("file", "", False), ("sha256", "", False)]), rows)
    yield facts([
        (t("files.together"), inputs_hash(record)),
        (t("files.program"), t("files.version", version=record["brasscap"])),
        *((t.word("programs", name), version) for name, version in record["versions"].items()),
        (t("files.format"), str(record["format"])),
    ])  # fmt: skip
    yield Words((t("files.again"),))
    option = " --without-suspects" if record["settings"]["without_suspects"] else ""
    yield Commands((f"brasscap adjust{option} JOB",))
    yield Words((t("files.same"), t("files.beside"), t("files.inside")))
    if not record["complete"]:
        yield Words((t("files.cut"),))


def limits(view: View) -> Iterator[Block]:
    """What the survey does not say, warnings of the computation, and the cautions."""
    t, record = view.texts, view.record
    yield supplied(view, ("limits",))
    if record["warnings"]:
        yield Items(tuple(plain(one, 400) for one in record["warnings"]), t("limits.warnings"))
    yield Items(tuple(t.branch("cautions").values()), t("limits.cautions"))
