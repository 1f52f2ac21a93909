"""Run a campaign: keep every finished chunk, go on where it stopped, reduce in order, keep the findings."""

from __future__ import annotations

import contextlib
import time
from collections.abc import Iterator, Sequence
from pathlib import Path
from typing import Any, TypeVar

from farhold.errors import CaseError, FarholdError, Fault
from farhold.study.campaign.chunks import Chunk
from farhold.study.campaign.declaration import Campaign, Findings
from farhold.study.campaign.engines import engine_for
from farhold.study.campaign.folder import StudyFolder, resume_line
from farhold.study.campaign.job import Job
from farhold.study.campaign.plan import Plan, differences, machine_faults, plan_of
from farhold.watch import SILENT, Watch

__all__ = ["InterruptedStudyError", "run_campaign"]

State = TypeVar("State")


class InterruptedStudyError(FarholdError):
    """A study was stopped before its end; what is finished is kept (exit 130)."""

    exit_code = 130


def run_campaign(
    campaign: Campaign[State],
    *,
    folder: str | Path | None = None,
    resume: bool = False,
    force: bool = False,
    cluster: str | None = None,
    allow_mixed: bool = False,
    words: Sequence[str] = (),
    watch: Watch = SILENT,
) -> Findings:
    """Compute, keep and reduce all chunks; the same bits for any engine, threads and number of stops.

    Parameters
    ----------
    campaign : what to do
    folder : of the study; None works in memory and keeps nothing
    resume : go on with what the folder holds; a finished study gives its findings again
    force : begin anew in a folder that holds a study
    cluster : None for this machine, ``local:N`` for N worker processes, or the address of a scheduler
    allow_mixed : go on on a machine whose last bits may differ
    words : the command line, without ``-o``, ``--resume`` and ``--force``, for the sentence that says how to go on

    Returns
    -------
    Findings
        With ``summary["seconds"]`` filled in: ``total`` of this run, and ``chunks`` computed in it.

    Raises
    ------
    OutputExistsError
        The folder is not empty (exit 2).
    CaseError
        `resume` without a folder, other inputs or another machine than the study was begun with, or another
        process runs it (exit 2).
    InterruptedStudyError
        Ctrl-C, or the watch raised KeyboardInterrupt; the sentence says how to go on (exit 130).
    FarholdError
        The disk is full, the folder was deleted, workers were lost (exit 2); finished chunks are kept.
    """
    begin_s = time.monotonic()
    plan = plan_of(campaign, words)
    if folder is None:
        if resume:
            raise CaseError(Fault("--resume", "needs the folder of the study", hint="give it with -o DIR"))
        return _Run(campaign, plan, None, cluster, allow_mixed, watch, begin_s).findings()
    with StudyFolder.held(folder, plan, resume=resume, force=force) as store:
        faults = differences(store.plan, plan)
        if not faults and not allow_mixed:
            faults = machine_faults(store.plan.machine, plan.machine, "this machine")
        if faults:
            raise CaseError(Fault(f"{folder}: {one.where}", one.what, one.allowed, one.hint) for one in faults)
        kept = store.findings()
        if kept is not None:
            watch.note("the study is finished; these are the findings it kept")
            return kept
        return _Run(campaign, store.plan, store, cluster, allow_mixed, watch, begin_s).findings()


class _Run:
    """One run of a campaign, with or without a folder."""

    def __init__(
        self,
        campaign: Campaign[Any],
        plan: Plan,
        store: StudyFolder | None,
        cluster: str | None,
        allow_mixed: bool,
        watch: Watch,
        begin_s: float,
    ) -> None:
        self.campaign = campaign
        self.store = store
        self.watch = watch
        self.begin_s = begin_s
        self.engine = engine_for(cluster)
        self.job = Job(
            campaign.compute,
            campaign.payload,
            None if store is None else str(store.path.resolve()),
            plan.digest,
            plan.machine,
            allow_mixed,
        )
        self.plan = plan
        self.done: set[int] = set()
        self.waiting: dict[int, Chunk] = {}
        self.next = 0
        self.state = campaign.start()

    def findings(self) -> Findings:
        """Do the work; say in every failure what is kept and how to go on."""
        with self._explained():
            total = self.campaign.chunks
            if self.store is not None:
                self.done = self.store.verified(self.watch.note)
            found = len(self.done)
            wanted = [index for index in range(total) if index not in self.done]
            if found:
                self.watch.note(f"{found:,} of {total:,} chunks are here already")
            self.watch.stage(f"chunks of {self.campaign.study}", total - found)
            self._reduce()
            if wanted:
                self._compute(wanted)
            findings = self.campaign.finish(self.state)
            seconds = {"total": time.monotonic() - self.begin_s, "chunks": len(wanted)}
            findings = Findings({**findings.summary, "seconds": seconds}, findings.tables, findings.notes)
            if self.store is not None:
                self.store.finish(findings)
            return findings

    def _compute(self, wanted: Sequence[int]) -> None:
        with contextlib.closing(self.engine.run(self.job, wanted, self.watch.note)) as results:
            for index, result in results:
                if isinstance(result, str):
                    if self.store is not None:
                        self.store.take(index, result)
                else:
                    if self.store is not None:
                        self.store.write(index, result)
                    # a kept chunk whose turn has not come is read again, so that memory stays bounded
                    if self.store is None or index == self.next:
                        self.waiting[index] = result
                self.done.add(index)
                self.watch.advance()
                self._reduce()

    def _reduce(self) -> None:
        """Take in every chunk whose turn has come."""
        while self.next in self.done:
            index = self.next
            chunk = self.waiting.pop(index, None)
            if chunk is None and self.store is not None:
                chunk = self.store.read(index)
            if chunk is None:
                chunk = self._again(index)
            self.state = self.campaign.reduce(self.state, chunk)
            self.next += 1

    def _again(self, index: int) -> Chunk:
        """Compute a chunk that was kept and is now unreadable."""
        self.watch.note(f"chunk {index} cannot be read back; it is computed again")
        chunk = self.job.perform(index)
        if self.store is not None:
            self.store.write(index, chunk)
        return chunk

    @contextlib.contextmanager
    def _explained(self) -> Iterator[None]:
        try:
            yield
        except KeyboardInterrupt:
            where = self.campaign.study if self.store is None else str(self.store.path)
            raise InterruptedStudyError(Fault(where, f"interrupted; {self._kept()}", hint=self._go_on())) from None
        except FarholdError as error:
            # of the kinds of error, only this one is about the disk and the workers, not about what was asked
            if type(error) is not FarholdError or self.store is None:
                raise
            raise self._stopped(error) from error

    def _stopped(self, error: FarholdError) -> FarholdError:
        fault = error.faults[0]
        if self.store is not None and not self.store.path.is_dir():
            fault = Fault(str(self.store.path), "the folder was deleted while the study ran")
        hint = "; ".join(part for part in (fault.hint, self._kept(), self._go_on()) if part)
        return FarholdError(Fault(fault.where, fault.what, fault.allowed, hint))

    def _kept(self) -> str:
        total = self.campaign.chunks
        if self.store is None:
            return f"{len(self.done):,} of {total:,} chunks were done and nothing is kept"
        return f"{self.store.count():,} of {total:,} chunks are kept"

    def _go_on(self) -> str:
        if self.store is None:
            return "-o DIR keeps finished chunks, so that --resume can go on"
        line = resume_line(self.plan.words, self.store.path)
        return f"go on with: {line}" if line else "call it again with resume=True to go on"
