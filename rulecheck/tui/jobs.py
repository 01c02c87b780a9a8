"""Work on a document off the screen's thread, and the messages that it sends."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

from textual import work
from textual.message import Message
from textual.screen import Screen
from textual.worker import get_current_worker

from rulecheck.errors import RulecheckError
from rulecheck.review.judging import Progress, words_of
from rulecheck.tui.document import Change, Document, Reading

Shown = Callable[[Reading], None]
Job = Callable[[Progress, Shown], tuple[Reading, Change | None]]


class CancelledError(Exception):
    """The work was given up."""


@dataclass
class Progressed(Message):
    """How far the work is."""

    document: Document
    done: int
    total: int
    what: str


@dataclass
class Read(Message):
    """A reading of a document; `final` where its remedies have been tried and the work has ended."""

    document: Document
    reading: Reading
    change: Change | None = None
    final: bool = False


@dataclass
class Failed(Message):
    """The work ended without a reading."""

    document: Document
    words: str


class Working(Screen[None]):
    """A screen that works on documents in a thread, on one at a time."""

    @work(thread=True, exclusive=True, group="review")
    def work_on(self, document: Document, job: Job) -> None:
        """Do a job on a document; what was being done is given up.

        Parameters
        ----------
        document : Document
        job : callable
            Given the callables for progress and for a first reading.
        """
        worker = get_current_worker()

        def progress(done: int, total: int, what: str) -> None:
            # a review made in a former job keeps this function, so the worker is asked for anew
            if get_current_worker().is_cancelled:
                raise CancelledError
            self.post_message(Progressed(document, done, total, what))

        def shown(reading: Reading) -> None:
            if not worker.is_cancelled:
                self.post_message(Read(document, reading))

        try:
            reading, change = job(progress, shown)
        except CancelledError:
            return
        except RulecheckError as error:
            self.post_message(Failed(document, str(error)))
        except Exception as error:  # noqa: BLE001 - a fault of the program must not close the screen
            self.post_message(Failed(document, f"a fault of the program itself: {words_of(error)}"))
        else:
            if not worker.is_cancelled or change is not None:  # what was written is written
                self.post_message(Read(document, reading, change, final=True))
