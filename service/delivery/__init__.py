"""Hands messages of the outbox to whatever takes our mail, and records what came of each."""
