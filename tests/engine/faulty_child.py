"""A child program whose work misbehaves on request; production knows none of these kinds.

The tests start it in place of ``service.engine.child``, whose loop it uses unchanged.
"""

import ctypes
import os
import signal
import sys
import time
from collections.abc import Mapping
from pathlib import Path

import orjson

from service.engine.child import Progress, Task, Work, main

MEBIBYTE = 2**20


_held: list[bytearray] = []


def _hang_in_c() -> None:
    """Wait for ever in C with the interpreter's lock held: no Python signal handler can run."""
    ctypes.PyDLL(None).pause()


def _eat(task: Task) -> Mapping[str, object]:
    """Allocate until the limit, then raise MemoryError as Python does."""
    hoard = []
    while True:
        hoard.append(bytearray(MEBIBYTE * int(task["mebibytes_each"])))


def misbehave(task: Task, progress: Progress) -> Mapping[str, object]:  # noqa: C901, PLR0911, PLR0912 - one branch for each fault is the clearest list
    """Do what ``task`` says under ``do``."""
    match task["do"]:
        case "echo":
            progress("echoing", {"length": len(task["text"])})
            return {"text": task["text"], "pid": os.getpid()}
        case "map":
            # Kept until the child ends, as a solver's memory may be.
            _held.append(bytearray(MEBIBYTE * task["mebibytes"]))
        case "rounds":
            progress("read", {"lanes": 8})
            for number in range(1, task["count"] + 1):
                progress("round", {"round": number})
            progress("solved", {})
            for number in range(1, task["count"] + 1):
                progress("round", {"round": number})
            return {"done": True}
        case "environment":
            return {
                "environment": dict(os.environ),
                "session": os.getsid(0),
                "pid": os.getpid(),
                "descriptors": sorted(int(name) for name in os.listdir("/proc/self/fd")),  # noqa: PTH208 - numbers, not paths
                "oom_score_adj": open("/proc/self/oom_score_adj").read().strip(),  # noqa: PTH123 - a child that ends at once
            }
        case "print":
            print(task["text"], flush=True)  # noqa: T201 - the fault under test
            os.write(1, b"and past Python\n")
            return {"printed": True}
        case "flood":
            for _ in range(200):
                os.write(1, b"x" * 10_000)
            return {"printed": True}
        case "hang_in_c":
            _hang_in_c()
        case "sleep":
            time.sleep(task["seconds"])
            return {"slept": True}
        case "kill":
            os.kill(os.getpid(), task["signal"])
            signal.pause()
        case "exit":
            os._exit(task["code"])
        case "leave":
            sys.exit(0)
        case "raise":
            raise RuntimeError("a mistake of ours")
        case "memory_error":
            return _eat(task)
        case "hold_memory":
            held = bytearray(MEBIBYTE * task["mebibytes"])
            held[::4096] = b"x" * len(held[::4096])
            time.sleep(60)
        case "speak_rubbish":
            os.write(int(sys.argv[2]), bytes.fromhex(task["bytes"]))
            time.sleep(60)
        case "orphan":
            pid = os.fork()
            if pid == 0:
                os.close(int(sys.argv[2]))
                time.sleep(60)
            if task["then"] == "exit":
                os._exit(7)
            return {"grandchild": pid}
    return {"done": True}


def _work() -> Work:
    return misbehave


def _plan() -> Work:
    """Return planning that misbehaves as the label of the run says, else leaves a small plan."""

    def work(task: Task, progress: Progress) -> Mapping[str, object]:
        target = Path(task["target"])
        label = task["options"]["label"] or ""
        progress("read", {"lanes": 8})
        first_time = not (marks := Path(task["source"]).parents[1] / "marks").exists()
        marks.mkdir(exist_ok=True)
        if label.startswith("{") and (first_time or "once" not in label):
            misbehave(orjson.loads(label), progress)
        plan = {"format": 1, "status": "planned", "plan_lines": [], "order_lines": []}
        content = b"{" if label == "rubbish" else orjson.dumps(plan)
        (target / "plan.json").write_bytes(content)
        (target / "certificate.json").write_bytes(b'{"format":1}')
        return {"state": "planned", "reason": None, "detail": None, "seconds": {"read": 0.1}}

    return work


def _slow_start() -> Work:
    time.sleep(60)
    return misbehave


def _broken_start() -> Work:
    raise ImportError("a library is missing")


if __name__ == "__main__":
    main({"test": _work, "plan": _plan, "slow_start": _slow_start, "broken_start": _broken_start})
