"""Run a program with its output on a made-up terminal, and hear what each stream got."""

import os
import select
import subprocess
import sys
from pathlib import Path

ROOT = Path(__file__).parents[2]
SLOW = 120.0  # seconds, from which a run counts as hung
AT_ONCE = ("import functools, sys; from aquabuf.cli import screen; "
           "screen.Progress = functools.partial(screen.Progress, after_s=0.0); "
           "from aquabuf.cli.main import main; main(sys.argv[1:], prog_name='aquabuf')")
PLAIN = "import sys; from aquabuf.cli.main import main; main(sys.argv[1:], prog_name='aquabuf')"


def run(words, folder, *, out_tty=False, err_tty=False, code=PLAIN, **environment):
    """Exit code, standard output, standard error; each from a terminal where asked, else from a pipe."""
    ends, theirs = {}, {}
    for name, tty in (("stdout", out_tty), ("stderr", err_tty)):
        ends[name], theirs[name] = os.openpty() if tty else os.pipe()
    env = {k: v for k, v in os.environ.items() if k not in ("NO_COLOR", "FORCE_COLOR")}
    env |= {"TERM": "xterm", "PYTHONPATH": str(ROOT)} | environment
    child = subprocess.Popen([sys.executable, "-c", code, *map(str, words)], cwd=folder, env=env, stdin=subprocess.DEVNULL, **theirs)
    for end in theirs.values():
        os.close(end)
    got = dict.fromkeys(ends.values(), b"")
    live = set(got)
    while live:
        ready = select.select(live, [], [], SLOW)[0]
        if not ready:
            child.kill()
            raise TimeoutError("the run hangs")
        for end in ready:
            try:
                block = os.read(end, 65536)
            except OSError:  # a terminal whose other side has gone
                block = b""
            got[end] += block
            live -= set() if block else {end}
    for end in got:
        os.close(end)
    return child.wait(), *(got[ends[name]].decode().replace("\r\n", "\n") for name in ("stdout", "stderr"))
