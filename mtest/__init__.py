"""mtest: which differences are real, in randomised studies with many endpoints and several arms."""

__version__ = "0.1.0"
