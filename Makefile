# `make demo` and `make test` are all that a newcomer needs; each builds .venv where it is missing or stale.
PYTHON ?= $(shell command -v python3.11 || echo python3)
BIN := .venv/bin
PIP := $(BIN)/python -m pip --quiet --disable-pip-version-check

.PHONY: demo test test-oldest check benchmark docs-figures clean

demo: .venv/installed
	$(BIN)/geoves run demo_region/region.toml

test: .venv/installed-test check
	$(BIN)/python -m pytest

# The lower bounds of pyproject.toml, in an environment of their own; not part of `make test`.
test-oldest: .venv-oldest/installed
	.venv-oldest/bin/python -m pytest -W default  # old libraries deprecate one another

.venv-oldest/installed: pyproject.toml tests/lower_bounds.py
	test -x .venv-oldest/bin/python || $(PYTHON) -m venv .venv-oldest
	.venv-oldest/bin/python tests/lower_bounds.py > .venv-oldest/lower-bounds.txt
	.venv-oldest/bin/python -m pip --quiet --disable-pip-version-check install \
		--constraint .venv-oldest/lower-bounds.txt --editable '.[test]'
	touch $@

check: .venv/installed-test
	$(BIN)/ruff check .
	$(BIN)/ruff format --check .
	$(BIN)/mypy
	$(BIN)/lint-imports

benchmark: .venv/installed-test
	$(BIN)/python -m tests.benchmarks.truth
	$(BIN)/python -m tests.benchmarks.speed
	$(BIN)/python -m tests.benchmarks.delivery
	$(BIN)/python -m tests.benchmarks.checks

.venv/installed: pyproject.toml constraints.txt
	test -x $(BIN)/python || $(PYTHON) -m venv .venv
	$(PIP) install --constraint constraints.txt --editable .
	touch $@

.venv/installed-test: pyproject.toml constraints.txt
	test -x $(BIN)/python || $(PYTHON) -m venv .venv
	$(PIP) install --constraint constraints.txt --editable '.[test]'
	touch .venv/installed $@

docs-figures: .venv/installed-test
	$(BIN)/python docs/figures/draw_figures.py

clean:
	rm -rf .venv .venv-oldest demo_region/delivery build *.egg-info
