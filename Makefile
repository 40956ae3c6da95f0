# Two commands for a newcomer: `make demo` and `make test`. Both make their own virtual environment.
# PYTHON names the interpreter to build it with, VENV where it goes.

PYTHON ?= python3
VENV ?= .venv
BIN := $(VENV)/bin

.DEFAULT_GOAL := help
.PHONY: help demo test test-workflows lint check benchmark soak clean need-python

help:  ## Show this list
	@grep -E '^[a-z-]+:.*##' $(MAKEFILE_LIST) | awk -F ':.*## ' '{printf "  make %-10s %s\n", $$1, $$2}'

demo: $(VENV)/.runs  ## Install, map the demo scene, print what came out
	$(BIN)/groundglow run configs/demo.toml

test: $(VENV)/.develops  ## Install with the development extras, run the whole test suite
	$(BIN)/python -m pytest

test-workflows: $(VENV)-workflows/.made  ## Run the Snakemake and CWL workflows for real, in an environment of their own
	$(VENV)-workflows/bin/python -m pytest configs/workflows/tests

lint: $(VENV)/.develops  ## Style, strict types, and the import-layer check
	$(BIN)/ruff check .
	$(BIN)/ruff format --check .
	$(BIN)/mypy
	$(BIN)/lint-imports

check: lint test  ## Everything that continuous integration runs

benchmark: $(VENV)/.develops  ## Speed and memory against GDAL's own driver and plain NumPy (minutes)
	$(BIN)/python benchmarks/main_job.py

soak: $(VENV)/.develops  ## Many kills, a long night, one very large raster; how planning grows (an hour)
	$(BIN)/python benchmarks/soak.py
	$(BIN)/python benchmarks/scheduler_cost.py
	$(BIN)/python benchmarks/plan_scale.py

clean:  ## Remove the virtual environment, build products and the demo's output
	rm -rf $(VENV) $(VENV)-workflows out build dist .pytest_cache .mypy_cache .ruff_cache .import_linter_cache .hypothesis
	find . -name __pycache__ -type d -prune -exec rm -rf {} +

# Each need is checked by name, so that a bare machine is told what to install.
need-python:
	@test "$$(uname -sm)" = "Linux x86_64" || \
		echo "Note: Groundglow is tested on Linux x86-64; this is $$(uname -sm)."
	@command -v $(PYTHON) >/dev/null || { \
		echo "Python is missing. Install Python 3.11 or newer (Debian, Ubuntu: apt-get install python3 python3-venv), or name one: make PYTHON=/path/to/python3"; exit 1; }
	@$(PYTHON) -c 'import sys; sys.exit(sys.version_info < (3, 11))' || { \
		echo "Python 3.11 or newer is needed, and $(PYTHON) is $$($(PYTHON) -V 2>&1). Name a newer one: make PYTHON=/path/to/python3.11"; exit 1; }
	@$(PYTHON) -c 'import venv, ensurepip' 2>/dev/null || { \
		echo "Python's venv module is missing. Install it (Debian, Ubuntu: apt-get install python3-venv)."; exit 1; }

$(BIN)/python: | need-python
	$(PYTHON) -m venv $(VENV)
	$(BIN)/python -m pip install --quiet --upgrade pip

$(VENV)/.runs: pyproject.toml | $(BIN)/python
	$(BIN)/python -m pip install --quiet --editable .
	@touch $@

# The workflow managers bring fifty packages of their own, and nothing else needs them.
$(VENV)-workflows/.made: pyproject.toml | need-python
	$(PYTHON) -m venv $(VENV)-workflows
	$(VENV)-workflows/bin/python -m pip install --quiet --upgrade pip
	$(VENV)-workflows/bin/python -m pip install --quiet --editable '.[workflows]'
	@touch $@

$(VENV)/.develops: pyproject.toml | $(BIN)/python
	$(BIN)/python -m pip install --quiet --editable '.[dev]'
	@touch $@ $(VENV)/.runs
