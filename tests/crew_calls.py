"""What the tests of crews let other processes do, by name."""

import os
import time
from pathlib import Path

from generator import chapter
from generator.tasks import Chapter, Task


def sleep_for_ever() -> None:
    while True:
        time.sleep(0.05)


def die() -> None:
    os._exit(3)


def process_number() -> int:
    return os.getpid()


def make_or_hang(task: Task) -> Chapter:
    """Works for ever on a campaign called slow, dies of one called deadly, and of one called unlucky once."""
    if task.folder.slug == "slow":
        sleep_for_ever()
    if task.folder.slug == "deadly":
        die()
    if task.folder.slug == "unlucky":
        mark = Path(task.folder.path).parent.parent / "was-unlucky"
        if not mark.exists():
            mark.touch()
            die()
    return chapter.make(task)
