"""`python -m tests.lock.make [NAME ...]`: lock our own renders afresh, all of them or those named.

Only after a change of the engine's version, of a shipped circuit or of a shipped pack; CHANGELOG.md says why.
"""

import sys

from kickrender.lock.make import ENDING, write_lock
from kickrender.sound.warm_up import warm_up
from tests.lock.shipped import CIRCUITS, FOLDER, names, plan


def main() -> None:
    warm_up()
    FOLDER.mkdir(exist_ok=True)
    for name in sys.argv[1:] or names():
        lock = write_lock(plan(name), FOLDER / f"{name}{ENDING}", "" if name == CIRCUITS else name, jobs=2)
        print(f"{lock.path}: {len(lock.hits)} hits")


if __name__ == "__main__":
    main()
