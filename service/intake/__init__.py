"""What comes in from people: observations, and the files of the network."""

from service.intake.take import take_observations, unreadable

__all__ = ["take_observations", "unreadable"]
