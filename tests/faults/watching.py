"""Daemons beside a test: started, waited for and ended, with what they say."""

import contextlib
import json
import os
import signal
import subprocess
import sys
import time

from campaigns_made import runaudit


class Watch:
    """One `runaudit watch` with its log; ended with the block that it is used in."""

    def __init__(self, plan, *arguments, env=None, name="watch"):
        self.plan = plan
        self.log = plan.parent / f"{name}.log"
        self._arguments = arguments
        self._env = env or {}
        self.process = None

    def __enter__(self):
        self.start()
        return self

    def __exit__(self, *error):
        self.process.kill()
        self.process.wait()

    def start(self):
        """Start the daemon, again if it was ended."""
        with self.log.open("ab") as log:
            self.process = subprocess.Popen(
                [sys.executable, "-P", "-m", "auditd", "--plan", str(self.plan), "watch", *self._arguments],
                stdin=subprocess.DEVNULL,
                stdout=log,
                stderr=log,
                env=os.environ | {"RUNAUDIT_KEY": "00ff", "RUNAUDIT_TRACE": "1"} | self._env,
            )

    def kill(self):
        """End it as a power cut would."""
        self.process.kill()
        self.process.wait()

    def end(self, number=signal.SIGTERM, seconds=10):
        """Ask it to end and return its exit code; more than the stated seconds are an error."""
        self.process.send_signal(number)
        return self.process.wait(seconds)

    @property
    def said(self):
        """What it has logged."""
        return self.log.read_text(encoding="utf-8")

    def await_said(self, words, seconds=30):
        """Wait until it has logged something."""
        until(lambda: words in self.said, seconds, lambda: self.said)

    def status(self):
        """Return what `status --json` shows."""
        return json.loads(runaudit(self.plan, "status", "--json").stdout)


def until(condition, seconds=30, tell=None):
    """Wait for a condition; fail with what `tell` tells."""
    deadline = time.monotonic() + seconds
    while time.monotonic() < deadline:
        with contextlib.suppress(FileNotFoundError):
            if condition():
                return
        time.sleep(0.05)
    raise AssertionError(f"not reached in {seconds} s: {tell() if tell is not None else condition}")
