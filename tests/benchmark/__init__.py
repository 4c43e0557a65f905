"""How well pages with known truth are read, family by family. Run `python -m tests.benchmark`."""
