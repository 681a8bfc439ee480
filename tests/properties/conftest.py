"""Random tests are about answers: how long one takes on a busy machine says nothing."""

from hypothesis import settings

settings.register_profile("no deadline", deadline=None)
settings.load_profile("no deadline")
