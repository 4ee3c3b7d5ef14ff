"""Room of the package; see DEVELOPERS.md."""
