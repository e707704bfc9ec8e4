"""What holds for every test: properties are judged by what they find, never by how long this machine takes."""

from __future__ import annotations

from hypothesis import settings

settings.register_profile("steady", deadline=None)
settings.load_profile("steady")
