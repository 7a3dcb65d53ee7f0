"""Settings for the whole suite."""

from hypothesis import HealthCheck, settings

# A shared 2-core machine is noisy: a deadline would measure the neighbours.
settings.register_profile("packmime", database=None, deadline=None, max_examples=60, suppress_health_check=[HealthCheck.too_slow])
settings.load_profile("packmime")
