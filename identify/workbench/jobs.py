"""Work in the background: read uploads in their own process, identify what they hold, keep every result at once.

A job that was running when the program ended waits again when it starts; queries it had added are not added twice.
"""

from __future__ import annotations

import logging
import threading
from collections.abc import Mapping
from functools import partial
from typing import Any

from identify.errors import InputError, IonwitnessError, LibraryError, SpectrumError
from identify.library.verify import verify_library
from identify.records import Rejection, SpectrumRecord
from identify.report.words import counted
from identify.workbench.case_rows import Job, NewQuery
from identify.workbench.desk import Desk
from identify.workbench.identifier_process import Broken, IdentifierProcess
from identify.workbench.intake_process import RUN_LIMITS, IntakeProcess, Limits
from identify.workbench.job_list import add_job, finish_job, next_job, report_progress, requeue_jobs
from identify.workbench.record_json import record_from_dict, rejection_from_dict
from identify.workbench.stored import settings_to_text

_LOG = logging.getLogger(__name__)
DRAWN_AHEAD = 20
"""Queries of one upload whose pages are drawn before somebody asks."""
BATCH = 10
"""Results written in one transaction."""


class Cancelled(Exception):
    """Somebody asked to stop."""


class JobRunner:
    """Threads that take waiting jobs, one each.

    Parameters
    ----------
    desk : Desk
    n_threads : int
    limits, run_limits : Limits
    """

    def __init__(
        self, desk: Desk, n_threads: int = 2, limits: Limits | None = None, run_limits: Limits = RUN_LIMITS
    ) -> None:
        self._desk = desk
        self._limits, self._run_limits = limits or Limits(), run_limits
        self._work = threading.Condition()
        paths = tuple(library.path for library in desk.libraries)
        self.identifier = IdentifierProcess(paths, desk.case.path, desk.settings)
        self._is_over = False
        self._cancelled: set[int] = set()
        self._processes: dict[int, IntakeProcess] = {}
        self._threads = [threading.Thread(target=self._run, name=f"job-{n}", daemon=True) for n in range(n_threads)]

    def start(self) -> None:
        """Start the threads; jobs cut off earlier wait again."""
        requeue_jobs(self._desk.case)
        for thread in self._threads:
            thread.start()

    def stop(self) -> None:
        """End all threads; what they were doing waits again at the next start."""
        with self._work:
            self._is_over = True
            processes = list(self._processes.values())
            self._work.notify_all()
        for process in processes:
            process.end()
        self.identifier.end()
        for thread in self._threads:
            thread.join(timeout=20.0)

    def add(self, kind: str, name: str, who: str, options: Mapping[str, Any]) -> int:
        """Id of a new job, which starts as soon as a thread is free."""
        job_id = add_job(self._desk.case, kind, name, who, self._desk.now(), options)
        with self._work:
            self._work.notify()
        return job_id

    def cancel(self, job_id: int) -> None:
        """Stop a job; what it has found so far is kept."""
        with self._work:
            self._cancelled.add(job_id)
            process = self._processes.get(job_id)
        if process:
            process.end()
        else:
            finish_job(self._desk.case, job_id, "cancelled", "cancelled", self._desk.now())

    def _run(self) -> None:
        while True:
            with self._work:
                if self._is_over:
                    return
                job = self._next()
                if job is None:
                    self._work.wait(timeout=2.0)
                    continue
            try:
                self._do(job)
            except LibraryError:
                _LOG.exception("job %s could not be ended: it waits again at the next start", job.id)

    def _next(self) -> Job | None:
        try:
            return next_job(self._desk.case)
        except LibraryError:
            _LOG.exception("the case file cannot be written: its work waits")
            return None

    def _do(self, job: Job) -> None:
        work = {"spectra": self._identify, "run": self._run_file, "verify": self._verify}[job.kind]
        try:
            state, message = "done", work(job)
        except Cancelled:
            if self._is_over:
                return  # it stays marked as running, and waits again at the next start
            state, message = "cancelled", "cancelled; what was found before is kept"
        except IonwitnessError as error:
            if self._is_over and isinstance(error, Broken):
                return
            state, message = "failed", error.message
        except Exception as error:
            # A bug in one job must not end the thread that does the others; it is shown as what it is.
            _LOG.exception("job %s", job.id)
            state, message = "failed", f"This is a bug, please report it: {error!r}"
        finish_job(self._desk.case, job.id, state, message, self._desk.now())

    def _check(self, job: Job) -> None:
        if self._is_over or job.id in self._cancelled:
            raise Cancelled

    def _lines(self, job: Job, process: IntakeProcess) -> Any:
        with self._work:
            self._check(job)
            self._processes[job.id] = process
        try:
            for line in process.lines():
                self._check(job)
                if "error" in line:
                    fault = line["error"]
                    raise InputError(
                        fault["what"],
                        where=job.name,
                        found=fault["found"],
                        expected=fault["expected"],
                        hint=fault["hint"],
                    )
                yield line
        except InputError:
            self._check(job)  # its process was ended because somebody cancelled
            raise
        finally:
            with self._work:
                del self._processes[job.id]

    def _orders(self, job: Job) -> dict[str, Any]:
        options = job.options
        orders = {**options, "kind": job.kind, "name": job.name, "path": str(self._desk.upload(options["upload"]))}
        if options.get("blank_upload"):
            orders["blank"] = str(self._desk.upload(options["blank_upload"]))
        return orders

    def _identify(self, job: Job) -> str:
        case = self._desk.case
        done = case.numbers_done(job.id)
        batch: list[NewQuery] = []
        rejected: list[Rejection] = []
        number = 0
        with IntakeProcess(self._orders(job), self._limits) as process:
            for line in self._lines(job, process):
                if "rejected" in line:
                    rejected.append(rejection_from_dict(line["rejected"]))
                    continue
                number += 1
                if number not in done:
                    found = self._identify_one(record_from_dict(line["record"]), number, rejected)
                    batch += [found] if found else []
                if len(batch) >= BATCH:
                    self._keep(job, batch, number)
        self._keep(job, batch, number)
        case.add_rejections(job.id, rejected)
        n_found = len(case.numbers_done(job.id))
        left_out = f", {len(rejected)} not used" if rejected else ""
        return f"{counted(n_found, 'query', 'queries')} identified{left_out}"

    def _keep(self, job: Job, batch: list[NewQuery], number: int) -> None:
        added = self._desk.case.add_queries(job.id, batch, who=job.who, at=self._desk.now(), run_id=None)
        if number <= DRAWN_AHEAD:
            for pair in added:
                self._desk.keep_drawn(pair[1], partial(self.identifier.draw, *pair))
        report_progress(self._desk.case, job.id, number, None, f"{counted(number, 'spectrum', 'spectra')} read")
        batch.clear()

    def _identify_one(self, record: SpectrumRecord, number: int, rejected: list[Rejection]) -> NewQuery | None:
        try:
            document = self.identifier.identify(record, number)
        except SpectrumError as error:
            source = record.source
            rejected.append(
                Rejection(source.path, source.line, "unusable spectrum", error.found, error.expected, error.hint)
            )
            return None
        return NewQuery(number, record, document)

    def _run_file(self, job: Job) -> str:
        case = self._desk.case
        orders = self._orders(job)
        orders["libraries"] = [str(library.path) for library in self._desk.libraries]
        orders["settings"] = settings_to_text(self._desk.settings.as_dict())
        rejected: list[Rejection] = []
        batch: list[NewQuery] = []
        run_id, n_components = None, None
        with IntakeProcess(orders, self._run_limits) as process:
            for line in self._lines(job, process):
                if "progress" in line:
                    report_progress(case, job.id, line["progress"][0], None, f"identifying {line['progress'][1]}")
                elif "run" in line:
                    run_id = case.add_run(job.id, job.name, self._desk.now(), line["run"])
                    n_components = len(line["run"]["components"])
                elif "rejected" in line:
                    rejected.append(rejection_from_dict(line["rejected"]))
                else:
                    number, record, document = line["found"]
                    batch.append(NewQuery(number, record_from_dict(record), document))
                if len(batch) >= BATCH:
                    case.add_queries(job.id, batch, who=job.who, at=self._desk.now(), run_id=run_id)
                    report_progress(case, job.id, batch[-1].number, n_components, "keeping the results")
                    batch.clear()
        case.add_queries(job.id, batch, who=job.who, at=self._desk.now(), run_id=run_id)
        case.add_rejections(job.id, rejected)
        left_out = f", {len(rejected)} not searched" if rejected else ""
        return f"{counted(n_components or 0, 'component')}{left_out}"

    def _verify(self, job: Job) -> str:
        told = []
        for library in self._desk.libraries:

            def report(done: int, what: str) -> None:
                self._check(job)
                report_progress(self._desk.case, job.id, done, None, f"checking {what}")

            found = verify_library(library.path, progress=report)
            problems = "; ".join(str(problem) for problem in found.problems[:5])
            verdict = "intact" if found.is_intact else f"NOT intact: {problems}"
            told.append(f"{library.path.name}: {counted(found.n_events, 'event')}, {verdict}")
        return ". ".join(told) + "."
