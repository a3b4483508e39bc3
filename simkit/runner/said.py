"""What a run says of itself, in its log and to its user."""

from __future__ import annotations

from collections.abc import Iterator, Mapping

from simkit.runner.plan import Jobs
from simkit.runner.progress import duration_text
from simkit.runner.result import RunSummary


def versions_text(attrs: Mapping[str, object]) -> str:
    """Versions that decide whether numbers may stand in one store."""
    return f"model {attrs.get('model_version')}, engine {attrs.get('engine_version')}"


def begin_text(jobs: Jobs, done: int) -> str:
    """What is reused and what is to be solved."""
    parts = [f"{jobs.store.cases} cases in {jobs.store.blocks} blocks"]
    if done:
        parts.append(f"{done} reused from the earlier run")
    if jobs.taken:
        parts.append(f"{jobs.taken} taken over unchanged from the earlier study")
    parts.append(f"{jobs.store.cases - done - jobs.taken} to solve")
    return ", ".join(parts)


def stopping_text(reason: str) -> str:
    """What happens now that no further block is started."""
    why = "" if reason == "on request" else f" {reason}"
    return f"stopping{why}: the blocks in hand are finished; Ctrl-C again stops at once"


def summary_lines(summary: RunSummary) -> Iterator[str]:
    """Counts per status, where the results are and how to go on."""
    counts = ", ".join(f"{n} {status.label}" for status, n in summary.counts.items() if n)
    yield (
        f"{counts}; {summary.reused} reused, {summary.solved} settled in "
        f"{duration_text(summary.seconds)}"
    )
    yield f"results: {summary.results_dir}"
    if summary.stopped:
        yield f"stopped {summary.stopped}; give the same command again to continue"
