"""Bench runs to resistance and turbidity against loading, with quality flags; plans and sheets for new runs."""
