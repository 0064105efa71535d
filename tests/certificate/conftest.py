"""Fixtures of the certificate's tests, from the invented job of `kestrel_ridge`."""

from __future__ import annotations

import kestrel_ridge as job
import pytest

from fieldbook.model.canonical import Tree


@pytest.fixture
def facts() -> Tree:
    """A signed and numbered certificate of mark KR-07."""
    return job.issued_facts()
