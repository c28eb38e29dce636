PYTHON ?= python3
VENV   ?= .venv
BIN    := $(VENV)/bin
STUDY  ?= configs/marlow_small.toml

.PHONY: run test check benchmarks clean
.DEFAULT_GOAL := run

# The stamp is newer than pyproject.toml when the environment is up to date.
$(VENV)/.installed: pyproject.toml
	$(PYTHON) -m venv $(VENV)
	$(BIN)/python -m pip install --quiet --editable '.[test]'
	@touch $@

run: $(VENV)/.installed      ## the whole job: study file in; ratios, verdict, pictures and report out
	$(BIN)/semitau study $(STUDY)

test: $(VENV)/.installed     ## every test, on all cores
	$(BIN)/python -m pytest -q --numprocesses auto

check: $(VENV)/.installed    ## style and types
	$(BIN)/ruff check .
	$(BIN)/ruff format --check .
	$(BIN)/mypy

benchmarks: $(VENV)/.installed  ## speeds and ratios, in one run
	$(BIN)/python -m benchmarks

clean:
	rm -rf $(VENV) out .numba_cache .pytest_cache .mypy_cache .ruff_cache
