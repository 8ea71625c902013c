"""What all tests share: property tests are not judged by the clock."""

from hypothesis import settings

settings.register_profile("phasedb", deadline=None)
settings.load_profile("phasedb")
