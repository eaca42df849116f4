"""What was read is remembered in the journal, so that a restart need not read it again. Losing it costs time only."""

from __future__ import annotations

from collections.abc import Iterable

from spikeward.daemon.claims import Claim
from spikeward.daemon.codec import decode_bench, decode_table, encode_bench, encode_table
from spikeward.daemon.holdings import Content
from spikeward.daemon.journal import FileRecord, Journal
from spikeward.daemon.pipeline import Pipeline
from spikeward.daemon.reading import ReadReply, is_sound

_TABLE, _BENCH, _UNREAD = "table", "bench", "unread"


def remember(pipeline: Pipeline, journal: Journal, replies: Iterable[ReadReply]) -> None:
    """Record what readers answered, in one transaction."""
    records = []
    for reply in replies:
        root, path, claim_key = reply.key
        state = pipeline.intake.files.get((root, path))
        content = state.contents.get(claim_key) if state else None
        if state is not None and content is not None:
            kind, payload = _text(content)
            records.append(FileRecord(root, path, state.stamp, content.file_digest, claim_key, kind, payload))
    journal.record_files(records)


def recall(pipeline: Pipeline, journal: Journal) -> None:
    """Take in what an earlier run had read, where the file still looks the same and would be read the same way.

    Files that changed or vanished meanwhile are found by the first look at the folders, like any other.
    """
    for record in journal.load_files():
        place = (record.root, record.path)
        claim = next((each for each in pipeline.intake.claims(place) if each.key == record.layout_digest), None)
        if claim is None:
            continue
        content = _content(record, claim)
        if content is None:
            continue
        pipeline.touched |= pipeline.intake.hold(place, record.stamp, record.layout_digest, content)
        pipeline.unsaid.add(place)


def _content(record: FileRecord, claim: Claim) -> Content | None:
    """What was read then; None where the record makes no sense, so that the file is read again."""
    try:
        table = decode_table(record.payload) if record.kind == _TABLE else None
        bench = decode_bench(record.payload) if record.kind == _BENCH else ()
    except (ValueError, TypeError, IndexError, RecursionError):
        return None
    if record.kind not in (_TABLE, _BENCH, _UNREAD) or (table is not None and not is_sound(table)):
        return None
    return Content(record.sha256, table, bench, record.payload if record.kind == _UNREAD else "", claim.layout)


def _text(content: Content) -> tuple[str, str]:
    if content.sentence:
        return _UNREAD, content.sentence
    if content.table is not None:
        return _TABLE, encode_table(content.table)
    return _BENCH, encode_bench(content.bench)
