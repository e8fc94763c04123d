"""Evidence: what other aims would name, and what more evidence would buy."""

from __future__ import annotations

from wideberth.chain.record import Record
from wideberth.report.blocks import Block, Bullets, Heading, Paragraph, Table
from wideberth.report.prospect_words import prospect_sentences
from wideberth.report.rows import alternative_header, alternative_row


def options(record: Record) -> list[Block]:
    """Write the blocks on alternatives and prospects; empty where there are none."""
    blocks: list[Block] = []
    if record.alternatives:
        reasons = tuple(f"{a.aim}: {a.reason}." for a in record.alternatives if a.reason)
        blocks += [
            Paragraph(
                "Each setting holds every limit with its guard and keeps at least half of the"
                " desirability that each goal has at the best compromise. In brackets: the spread"
                " that setting errors alone make."
            ),
            Table(
                "Other aims side by side",
                alternative_header(record.models),
                tuple(
                    alternative_row(one, record.alternatives, record.study)
                    for one in record.alternatives
                    if one.setpoint is not None
                ),
            ),
        ]
        blocks += [Bullets("", reasons)] if reasons else []
    said = prospect_sentences(record.prospects, record.choice, record.study)
    if said:
        blocks.append(Bullets("What more evidence would buy", said))
    return [Heading(3, "Alternatives considered"), *blocks] if blocks else []
