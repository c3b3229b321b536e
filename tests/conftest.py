"""One hypothesis profile for the whole suite: reproducible, and without a clock that could fail it."""

from hypothesis import HealthCheck, settings

settings.register_profile(
    "fixed",
    deadline=None,
    derandomize=True,
    max_examples=60,
    suppress_health_check=[HealthCheck.too_slow, HealthCheck.filter_too_much],
)
settings.load_profile("fixed")
