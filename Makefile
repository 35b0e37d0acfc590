# `make demo` and `make test` are all that a newcomer needs; each builds .venv where it is missing or stale.
PYTHON ?= $(shell command -v python3.11 || echo python3)
BIN := .venv/bin
PIP := $(BIN)/python -m pip --quiet --disable-pip-version-check

.PHONY: demo test check benchmark docs-figures clean

demo: .venv/installed
	$(BIN)/geoves run demo_region/region.toml

test: .venv/installed-test check
	$(BIN)/python -m pytest

check: .venv/installed-test
	$(BIN)/ruff check .
	$(BIN)/ruff format --check .
	$(BIN)/mypy
	$(BIN)/lint-imports

benchmark: .venv/installed-test
	$(BIN)/python -m tests.benchmarks.truth
	$(BIN)/python -m tests.benchmarks.speed

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
	rm -rf .venv demo_region/delivery build *.egg-info
