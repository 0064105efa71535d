"""Writes the golden certificates anew: `python tests/certificate/write_golden.py`.

Run it only when a change of the certificate's words, layout or facts is meant, and read the difference before it is
committed: what changes here changes the paper.
"""

from __future__ import annotations

from pathlib import Path

import kestrel_ridge as job

from fieldbook.certificate import as_json, as_text

GOLDEN = Path(__file__).parent.parent / "golden"

if __name__ == "__main__":
    facts = job.issued_facts()
    (GOLDEN / "certificate_kr07.json").write_bytes(as_json.render(facts))
    (GOLDEN / "certificate_kr07.txt").write_bytes(as_text.render(facts))
