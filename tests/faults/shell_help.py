"""What stands between a window and the program in life: a shell with job control, here in a few lines of its own.

Run as a program in a pseudo-terminal it takes the terminal, gives it to the command, says so when that is stopped,
sends it on at the next line typed, and becomes a plain `sh` in the same terminal when the command has ended.
"""

import fcntl
import os
import signal
import sys
import termios

STOPPED = "job stopped; a line sends it on"
ENDED = "job ended with"


def _start(command: list[str]) -> int:
    child = os.fork()
    if child == 0:
        os.setpgid(0, 0)
        os.tcsetpgrp(0, os.getpid())
        signal.signal(signal.SIGTTOU, signal.SIG_DFL)
        os.execv(command[0], command)  # noqa: S606 - this is the shell
    return child


def _go_on(child: int) -> None:
    os.tcsetpgrp(0, os.getpgrp())
    print(STOPPED, flush=True)
    sys.stdin.readline()
    os.tcsetpgrp(0, child)
    os.killpg(child, signal.SIGCONT)


def main() -> None:
    """Be the shell of the command in the arguments, whose first is the file to write its process number to."""
    fcntl.ioctl(0, termios.TIOCSCTTY, 0)
    signal.signal(signal.SIGTTOU, signal.SIG_IGN)
    child = _start(sys.argv[2:])
    with open(sys.argv[1], "w", encoding="ascii") as file:  # noqa: PTH123 - quick to start: no pathlib
        file.write(f"{child}\n")
    while os.WIFSTOPPED(status := os.waitpid(child, os.WUNTRACED)[1]):
        _go_on(child)
    os.tcsetpgrp(0, os.getpgrp())
    print(ENDED, os.waitstatus_to_exitcode(status), flush=True)
    os.execv("/bin/sh", ["sh"])  # noqa: S606 - the rest of it


if __name__ == "__main__":
    main()
