"""Jobs for the tests of the engine: the body says what to do, as JSON.  Runs in a slot's child."""

import ctypes
import json
import os
import signal
import subprocess
import sys
import time
from pathlib import Path

from service.engine.beside import Beside


def act(head, body, report, stop):
    order = json.loads(body)
    answer = _ACTS[order.get("do", "echo")](order, report, stop)
    text = json.dumps({"id": head.get("id"), "answer": answer}).encode()
    figures = {"verdict": "local minimum", "value": 1.5, "value_error": 1e-9, "value_unit": "m"}
    return {"figures": figures, "stopped": answer == "stopped", "pid": os.getpid()}, text


def _echo(order, report, stop):
    return order.get("say")


def _print(order, report, stop):
    print("x" * 200_000)
    sys.stderr.write("y" * 200_000)
    os.write(1, b"\0\0\0\2\0\0\0\0{}")  # what a frame looks like
    subprocess.run(["echo", "from a program of its own"], check=True)
    return "printed"


def _count(order, report, stop):
    """Steps with signs of life; stops when asked."""
    if "mark" in order:
        Path(order["mark"]).touch()
    for step in range(order["steps"]):
        if stop():
            return "stopped"
        report({"kind": "iteration", "iteration": step, "value": float(step)})
        time.sleep(order.get("pause", 0.005))
    report({"kind": "mesh", "mesh": 1})
    return "counted"


def _deaf(order, report, stop):
    """In C code that hears nothing."""
    report({"kind": "iteration", "iteration": 0})
    ctypes.PyDLL(None).usleep(ctypes.c_uint(60_000_000))  # a PyDLL call keeps the interpreter's lock


def _sleep(order, report, stop):
    report({"kind": "iteration", "iteration": 0})
    time.sleep(order["seconds"])
    return "slept"


def _die(order, report, stop):
    os.kill(os.getpid(), getattr(signal, order["signal"]))
    time.sleep(10)


def _wild_pointer(order, report, stop):
    ctypes.string_at(0)


def _leave(order, report, stop):
    os._exit(7)


def _die_once(order, report, stop):
    """Dies where the mark is missing, and leaves it."""
    mark = Path(order["mark"])
    if not mark.exists():
        mark.touch()
        os.kill(os.getpid(), signal.SIGKILL)
    return "survived"


def _hog(order, report, stop):
    held = []
    for _ in range(order["megabytes"]):
        held.append(bytearray(os.urandom(1) * 2**20))
        time.sleep(0.0005)
    return len(held)


def _hog_beside(order, report, stop):
    """The memory is that of processes which the job has started, each less than the limit."""

    def task(watch):
        held = os.urandom(1) * (order["megabytes"] * 2**20)
        time.sleep(30)
        return held

    return len(Beside(3)([task] * 3, lambda number, progress: False))


def _refused_allocation(order, report, stop):
    return len(bytearray(2**45))


def _raise(order, report, stop):
    raise ArithmeticError(order["say"])


def _exit(order, report, stop):
    sys.exit(3)


def _not_json(order, report, stop):
    return float("nan")


def _append(order, report, stop):
    """Leaves a line per execution, so that a test can count them."""
    time.sleep(order.get("seconds", 0))
    with Path(order["file"]).open("a") as file:
        file.write(order["say"] + "\n")
    return order["say"]


def _noise(order, report, stop):
    """A large answer that does not compress below half."""
    time.sleep(order["seconds"])
    return os.urandom(order["bytes"]).hex()


_ACTS = {
    "echo": _echo,
    "print": _print,
    "count": _count,
    "deaf": _deaf,
    "sleep": _sleep,
    "die": _die,
    "wild pointer": _wild_pointer,
    "leave": _leave,
    "die once": _die_once,
    "hog": _hog,
    "hog beside": _hog_beside,
    "refused allocation": _refused_allocation,
    "raise": _raise,
    "exit": _exit,
    "not json": _not_json,
    "append": _append,
    "noise": _noise,
}


def unusable(head, body, report, stop):
    """Its answer is none that the store could keep."""
    return {"figures": {"unheard-of": 1}}, b"{}"
