"""Settings of all tests: no example of a property is a fault because the machine was busy."""

from hypothesis import settings

settings.register_profile("any_speed", deadline=None)
settings.load_profile("any_speed")
