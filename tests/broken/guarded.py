"""The program with its hands tied: bounded memory, no network, nothing run, nothing written but where it may.

    python -B -m tests.broken.guarded MEMORY FOLDER... -- reduce SURVEY

MEMORY is the address space in MB; the folders are those that may be written to. What is not allowed ends the program with
exit code 99 and says what it was.
"""

from __future__ import annotations

import os
import resource
import sys
import tempfile
from pathlib import Path

_FORBIDDEN = (
    "socket.connect",
    "socket.getaddrinfo",
    "subprocess.Popen",
    "os.system",
    "os.exec",
    "os.posix_spawn",
)
_CHANGES = (
    "os.remove",
    "os.rename",
    "os.rmdir",
    "os.mkdir",
    "os.symlink",
    "os.link",
    "os.chmod",
    "os.truncate",
    "shutil.rmtree",
)
_WRITES = os.O_WRONLY | os.O_RDWR | os.O_CREAT | os.O_TRUNC | os.O_APPEND


def main() -> None:
    """Tie the hands, then run the program."""
    memory, *rest = sys.argv[1:]
    places = [Path(one).resolve() for one in rest[: rest.index("--")]]
    size = int(memory) * 10**6
    resource.setrlimit(resource.RLIMIT_AS, (size, size))

    def refuse(what: str) -> None:
        os.write(2, f"forbidden: {what}\n".encode("utf-8", "replace"))
        os._exit(99)

    def allowed(path: object) -> bool:
        if not isinstance(path, str | bytes | os.PathLike):
            return True  # a descriptor, whose file was opened before
        at = Path(os.path.abspath(os.fsdecode(path)))  # noqa: PTH100 (resolved below, where its parent is there)
        at = at.parent.resolve() / at.name
        return at == Path(os.devnull) or any(at.is_relative_to(place) for place in places)

    def watch(event: str, arguments: tuple[object, ...]) -> None:
        if event.startswith(_FORBIDDEN):
            refuse(f"{event} {arguments!r}")
        elif (
            event == "open"
            and isinstance(arguments[2], int)
            and arguments[2] & _WRITES
            and not allowed(arguments[0])
        ):
            refuse(f"writing {arguments[0]!r}")
        elif event in _CHANGES and not allowed(arguments[0]):
            refuse(f"{event} {arguments[0]!r}")

    # Before the hands are tied, as matplotlib keeps a list of the machine's fonts, and tempfile tries where it may write.
    import matplotlib.font_manager  # noqa: F401, PLC0415

    from gradeline.cli import main as program  # noqa: PLC0415 (in this order, in the child)

    tempfile.gettempdir()
    sys.addaudithook(watch)
    sys.argv = ["gradeline", *rest[rest.index("--") + 1 :]]
    program()


if __name__ == "__main__":
    main()
