"""Property tests try the same cases every time and at any speed, so that a busy machine fails none of them."""

import hypothesis

hypothesis.settings.register_profile("steady", deadline=None, derandomize=True, database=None)
hypothesis.settings.load_profile("steady")
