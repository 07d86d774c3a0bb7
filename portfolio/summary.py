"""What the command line prints of a finished step."""

from __future__ import annotations

import textwrap
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from portfolio.job import JudgeReport, PublishReport, PullReport
    from portfolio.publishing.wording import Explanation

WIDTH = 100


def pulled(report: PullReport) -> None:
    """Source by source; the numbers add up to the rows read (unregistered ones are among the new)."""
    for source in report.sources:
        print(
            f"{source.name}: {source.status}; {source.items} items, {source.read} rows read, {source.new} new, "
            f"{source.known} already known, {source.corrected} corrected, {source.rejected} rejected"
            + (f", {source.empty} without a value" if source.empty else "")
            + (f", {source.unregistered} of unregistered characteristics" if source.unregistered else "")
        )
        for item, reason in source.refused:
            print(f"  refused {item}: {reason}")
        for message in source.messages:
            print(f"  {message}")


def judged(report: JudgeReport) -> None:
    """Counts of the cells and the length of the centering list."""
    cells = ", ".join(
        f"{count} {cell if cell == 'not judged' else f'({cell})'}" for cell, count in report.counts.items()
    )
    print(f"judged {sum(report.counts.values())} characteristics up to {report.as_of:%Y-%m-%d %H:%M} UTC: {cells}")
    print(f"centering alone is expected to be enough for {report.listed}")


def published(report: PublishReport) -> None:
    """Where the report is."""
    print(f"published {report.folder} ({report.files} files, {report.bytes / 1e6:.1f} MB)")
    for path in report.left_over:
        print(f"{path} could not be removed; close what has it open, or the next publishing tries again")
    print(f"open {report.index.resolve()}")


def explained(told: Explanation) -> None:
    """Headings and sentences, wrapped."""
    for heading, sentences in told.paragraphs:
        print(heading)
        for sentence in sentences:
            print(textwrap.fill(sentence, WIDTH, initial_indent="  ", subsequent_indent="  "))
        print()
