"""Write KEYS.md, the reference of every key of a scene, anew from the models.

python scenes/make_keys.py [FOLDER]
"""

from __future__ import annotations

import sys
from pathlib import Path

from simimg.scene.reference import key_reference

folder = Path(sys.argv[1]) if len(sys.argv) > 1 else Path(__file__).parent
(folder / "KEYS.md").write_text(key_reference(), encoding="utf-8")
