"""Words that people use for a column; they decide only where values leave it open, and never against them."""

from __future__ import annotations

from typing import Final

ID: Final = frozenset({"id", "uid", "uuid", "run", "job", "task", "trial", "name", "key"})
SEED: Final = frozenset({"seed", "seeds", "rng", "entropy", "random"})
SEQUENCE: Final = frozenset(
    {"seq", "sequence", "number", "num", "no", "nr", "index", "idx", "order", "counter"}
)
TIME: Final = frozenset({
    "time", "timestamp", "stamp", "date", "at", "when", "start", "started", "begin", "began", "end",
    "ended", "finish", "finished", "stop", "stopped", "completed", "created", "submitted", "queued", "ts",
    "datetime", "utc",
})  # fmt: skip
START: Final = frozenset({"start", "started", "begin", "began", "launch", "launched"})
FINISH: Final = frozenset({"end", "ended", "finish", "finished", "stop", "stopped", "completed", "done"})
PARENT: Final = frozenset(
    {"parent", "restart", "restarted", "resume", "resumed", "continues", "previous", "ancestor"}
)
STATUS: Final = frozenset(
    {
        "status",
        "state",
        "outcome",
        "exit",
        "returncode",
        "rc",
        "success",
        "ok",
        "converged",
        "completed",
        "failed",
    }
)
DONE: Final = frozenset({
    "ok", "done", "complete", "completed", "success", "succeeded", "successful", "finished", "pass",
    "passed", "converged", "true", "0", "exited normally",
})  # fmt: skip
NOT_DONE: Final = frozenset({
    "fail", "failed", "failure", "error", "errored", "timeout", "timedout", "killed", "crash", "crashed",
    "aborted", "cancelled", "canceled", "diverged", "oom", "false", "incomplete", "broken", "preempted",
    "lost", "running", "nan",
})  # fmt: skip
NUISANCE: Final = frozenset({
    "host", "hostname", "node", "machine", "worker", "build", "version", "commit", "sha", "revision",
    "rev", "git", "compiler", "branch", "operator", "user", "day", "week", "device", "gpu", "cpu", "slot",
    "rack", "queue", "partition", "lab", "os", "kernel", "image", "container", "env", "environment",
    "site", "region", "cluster", "shift", "batch", "lot", "instrument", "platform", "driver", "library",
    "tag", "release",
})  # fmt: skip
FACTOR: Final = frozenset({
    "cfg", "config", "configuration", "conf", "param", "params", "parameter", "parameters", "setting",
    "settings", "option", "options", "factor", "factors", "variant", "treatment", "arm", "design",
    "setup", "model", "method", "solver", "algorithm", "scheme", "mesh", "level",
})  # fmt: skip
MACHINE: Final = frozenset(
    {"host", "hostname", "node", "machine", "worker", "device", "gpu", "slot", "instrument"}
)
DURATION: Final = frozenset({"duration", "elapsed", "walltime", "wall", "runtime", "seconds"})
SHARE: Final = frozenset(
    {"prob", "probability", "share", "fraction", "accuracy", "acc", "rate", "ratio", "coverage", "p"}
)
