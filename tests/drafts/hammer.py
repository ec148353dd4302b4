"""Write to a draft until killed; say each edit's text only once it is acknowledged. Run by `test_killed.py`."""

from __future__ import annotations

import sys
from pathlib import Path

from ngm.drafts import Saved, Store


def main(path: str, key: str, name: str) -> None:
    store = Store(Path(path))
    count = 0
    while True:
        draft = store.get(key)
        assert draft is not None
        text = f"{name} {count} " + "x" * (count % 50 * 200)
        answer = store.save(key, draft.rev, text)
        sys.stdout.write(f"{name} {count} {'head' if isinstance(answer, Saved) else 'aside'}\n")
        sys.stdout.flush()
        count += 1


if __name__ == "__main__":
    main(*sys.argv[1:])
