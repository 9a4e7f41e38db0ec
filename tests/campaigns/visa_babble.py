"""Many spoilt conversations with instruments: nothing but captures and `SourceError` comes out.

Run ``python -m tests.campaigns.visa_babble [conversations for each dialect]``.
"""

from __future__ import annotations

import random
import sys
import time

from tests.drivers.visa.test_fuzz import Babbling, converse, spoilt_conversation
from tests.drivers.visa.test_probing import SPEAKERS


def main() -> None:
    """Run them and count; the first failure ends it with its seed."""
    count = int(sys.argv[1]) if len(sys.argv) > 1 else 3000
    for dialect in SPEAKERS:
        begun, sound, babble = time.monotonic(), 0, 0
        for seed in range(count):
            try:
                sound += spoilt_conversation(seed, dialect)
                babble += converse(Babbling(random.Random(seed)), dialect, captures=2)
            except Exception:
                print(f"{dialect}: seed {seed}")
                raise
        print(
            f"{dialect:18} {count} spoilt conversations, {sound} captures; {count} of babble, "
            f"{babble} captures; {time.monotonic() - begun:.0f} s"
        )


if __name__ == "__main__":
    main()
