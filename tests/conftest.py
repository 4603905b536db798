"""Settings for the whole suite: generated cases are the same in every run."""

import hypothesis

hypothesis.settings.register_profile("same-every-run", derandomize=True, deadline=None)
hypothesis.settings.load_profile("same-every-run")
