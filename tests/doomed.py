"""Ensembles and executors that fail on purpose; a module of its own, so that other processes can import it."""

from __future__ import annotations

import os
from concurrent.futures import Executor, Future
from dataclasses import dataclass

from trueturn.randomised import Drift


@dataclass(frozen=True)
class Killer(Drift):
    """qDRIFT whose sample 20 ends the process that draws it."""

    def sample(self, index):
        if index == 20:
            os._exit(3)
        return super().sample(index)


@dataclass(frozen=True)
class Failing(Drift):
    """qDRIFT whose samples 5 and 8 fail."""

    def sample(self, index):
        if index in (5, 8):
            raise RuntimeError(f"no sample {index}")
        return super().sample(index)


class Unpicklable(Exception):
    """An exception that reaches no other process: its arguments are not those it is made from."""

    def __init__(self, number, why):
        super().__init__(f"{why} {number}")


@dataclass(frozen=True)
class Stubborn(Drift):
    """qDRIFT whose samples 7, 100 and 199 fail with an exception that cannot be unpickled."""

    def sample(self, index):
        if index in (7, 100, 199):
            raise Unpicklable(index, "no sample")
        return super().sample(index)


class Dying(Executor):
    """Runs a few tasks and dies: later ones stay behind with an error, or are refused."""

    def __init__(self, tasks, refuse):
        self.left, self.refuse = tasks, refuse

    def submit(self, function, /, *arguments, **keywords):
        future = Future()
        if self.left > 0:
            self.left -= 1
            future.set_result(function(*arguments, **keywords))
        elif self.refuse:
            raise ConnectionError("the cluster is gone")
        else:
            future.set_exception(ConnectionError("the cluster is gone"))
        return future
