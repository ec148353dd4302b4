"""Work in threads of its own, kept by what it is about: what formulas and long computations share. No Streamlit here."""

from __future__ import annotations

import threading
import time
from abc import ABC, abstractmethod
from collections import OrderedDict
from collections.abc import Callable, Hashable
from typing import Generic, TypeVar

__all__ = ["Background", "Kept"]


class Background(ABC):
    """One piece of work on its way; `begin` starts it. What nobody waits for is stopped.

    Attributes
    ----------
    name : str
        Of its thread.
    patience : float
        Seconds without a question after which it is stopped.
    begun : float
        When, on the monotonic clock.
    abandoned : bool
        It was stopped because nobody waited any longer.
    """

    name = "background"
    patience = 10.0

    def __init__(self) -> None:
        self.abandoned = False
        self._done = threading.Event()
        self._asked = self.begun = time.monotonic()

    def begin(self) -> None:
        """Start its threads; once."""
        threading.Thread(target=self._run, name=self.name, daemon=True).start()
        threading.Thread(target=self._watch, name=f"{self.name}-watch", daemon=True).start()

    @property
    @abstractmethod
    def stopped(self) -> bool:
        """Return whether a stop was asked for."""

    @abstractmethod
    def stop(self) -> None:
        """Stop it at its next step."""

    @abstractmethod
    def work(self) -> None:
        """Do it, and keep what comes of it; whatever goes wrong is kept too."""

    def wait(self, seconds: float) -> bool:
        """Wait for the end, at most so long; return whether it has ended. Meanwhile somebody is waiting."""
        end = time.monotonic() + seconds
        while True:
            now = self._asked = time.monotonic()
            if self._done.wait(min(max(end - now, 0), self.patience / 4)) or time.monotonic() >= end:
                return self._done.is_set()

    def _run(self) -> None:
        try:
            self.work()
        finally:
            self._done.set()

    def _watch(self) -> None:
        while not self._done.wait(0.5):
            if time.monotonic() - self._asked > self.patience:
                self.abandoned = True
                self.stop()
                return


Key = TypeVar("Key", bound=Hashable)
Piece = TypeVar("Piece", bound=Background)


class Kept(Generic[Key, Piece]):
    """The last `most` pieces of work, by what they are about: two who ask the same wait for one of them."""

    def __init__(self, most: int) -> None:
        self.most = most
        self._pieces: OrderedDict[Key, Piece] = OrderedDict()
        self._lock = threading.Lock()

    def start(self, key: Key, make: Callable[[], Piece]) -> Piece:
        """Return the work on this, begun if there is none; what was abandoned is begun anew."""
        with self._lock:
            piece = self._pieces.get(key)
            if piece is None or piece.abandoned:
                piece = self._pieces[key] = make()
                piece.begin()
            self._pieces.move_to_end(key)
            while len(self._pieces) > self.most:
                self._pieces.popitem(last=False)[1].stop()
        return piece

    def get(self, key: Key) -> Piece | None:
        """Return the work on this where there is any; begins nothing."""
        with self._lock:
            return self._pieces.get(key)

    def forget(self, key: Key) -> None:
        """Stop and drop the work on this, so that the next `start` begins anew."""
        with self._lock:
            piece = self._pieces.pop(key, None)
        if piece is not None:
            piece.stop()

    def subjects(self) -> list[Key]:
        """Return what there is work on, the longest unasked first."""
        with self._lock:
            return list(self._pieces)
