# Two commands do everything on a fresh machine: `make demo` and `make test`. Each makes its own environment in .venv.
SHELL := /bin/bash
PYTHON ?= $(shell for p in python3 python3.11 python3.12 python3.13 python3.14; do \
	command -v $$p >/dev/null && $$p -c 'import sys; sys.exit(sys.version_info < (3, 11))' 2>/dev/null && echo $$p && break; done)
VENV := .venv
BIN := $(VENV)/bin
READY := $(VENV)/.ready
TESTS ?= tests

.PHONY: demo test test-slow lint bench bench-readme lock clean

demo: $(READY)
	$(BIN)/rigd demo

# The whole test command: style, types, import rules, then the fast tests.
test: $(READY) | tools
	$(MAKE) --no-print-directory lint
	$(BIN)/python -m pytest -q -n 2 $(TESTS)

test-slow: $(READY) | tools
	$(BIN)/python -m pytest -q -m slow $(TESTS)

lint: $(READY)
	$(BIN)/ruff check .
	$(BIN)/ruff format --check .
	$(BIN)/mypy
	$(BIN)/lint-imports

bench: $(READY)
	$(BIN)/python tests/bench/run.py

# The table and the plot of README.md, from the last `make bench`.
bench-readme: $(READY)
	$(BIN)/python tests/bench/readme_table.py bench.json

.PHONY: tools
tools:
	@command -v mosquitto >/dev/null || PATH="$$PATH:/usr/sbin" command -v mosquitto >/dev/null \
		|| { echo "rigd tests need the MQTT broker: sudo apt-get install mosquitto"; exit 1; }

$(READY): pyproject.toml requirements.lock
	@test -n "$(PYTHON)" || { echo "rigd needs Python 3.11 or newer: sudo apt-get install python3 python3-venv"; exit 1; }
	@$(PYTHON) -c 'import ensurepip, venv' 2>/dev/null \
		|| { echo "rigd needs Python's venv module: sudo apt-get install python3-venv"; exit 1; }
	@echo "making the environment in $(VENV); once, a few minutes"
	$(PYTHON) -m venv $(VENV)
	$(BIN)/python -m pip install -q --disable-pip-version-check --require-hashes -r requirements.lock
	$(BIN)/python -m pip install -q --disable-pip-version-check --no-deps --no-build-isolation -e .
	@echo "compiling the simulator's kernels once"
	@$(BIN)/rigd dry-run configs/rigs/two-pump-column.toml configs/recipes/demo-sweep.toml --json >/dev/null 2>&1
	@touch $(READY)

# Pins and hashes only, no addresses.
lock:
	$(BIN)/python -m pip install -q uv
	$(BIN)/uv export -q --no-header --no-annotate --no-emit-project --all-groups --no-python-downloads -o requirements.lock
	rm -f uv.lock

clean:
	rm -rf $(VENV) .mypy_cache .ruff_cache .pytest_cache .hypothesis
