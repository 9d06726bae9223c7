"""Asserts in the shared bench show their values too."""

import pytest

pytest.register_assert_rewrite("topology.bench")
