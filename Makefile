# Everything a contributor types; CI types the same.
VENV ?= .venv
PYTHON ?= python3
BIN := $(VENV)/bin
READY := $(VENV)/.ready
# pytest's own options, for example: make test PYTEST_ARGS='-k units'
PYTEST_ARGS ?=

.PHONY: demo test unit soak table lint bench wheel clean help

help:
	@echo 'make demo   set up, verify the example spindle decoder, then catch a planted fault'
	@echo 'make test   set up, run every check and test'
	@echo 'make unit   the tests that need no simulator'
	@echo 'make soak   the tests that draw at random, for long'
	@echo 'make table  every right and every faulty decoder of the tests, with what was found'
	@echo 'make lint   ruff and mypy'
	@echo 'make bench  stimulus and verified edges per second, the latter beside a plain cocotb bench'
	@echo 'make wheel  build the package into dist/'

$(READY): pyproject.toml
	$(PYTHON) -m venv $(VENV) || { echo 'python3 cannot make environments; on Debian and Ubuntu: apt-get install python3-venv'; exit 1; }
	$(BIN)/python -m pip install --quiet --disable-pip-version-check --editable '.[dev]'
	@touch $@

demo: $(READY)
	@echo '--- The spindle decoder, right:'
	$(BIN)/tbkit verify example_dut/spindle.yaml --simulator verilator
	@echo
	@echo '--- The same job with a fault planted in the RTL; tbkit must find it:'
	$(BIN)/tbkit verify example_dut/faulty_reversal.yaml --simulator verilator; test $$? -eq 1
	@echo
	@echo '--- The fault was caught, as it should be.'

test: lint
	$(BIN)/python -m pytest -n auto $(PYTEST_ARGS)

unit: $(READY)
	$(BIN)/python -m pytest tests/unit $(PYTEST_ARGS)

soak: $(READY)
	TBKIT_SOAK=1 $(BIN)/python -m pytest -n auto tests/unit/test_oracles_bruteforce.py tests/unit/test_inputs.py \
	  tests/simulator/test_right_decoders.py tests/simulator/test_mutants.py tests/simulator/test_describe.py \
	  tests/simulator/test_standalone.py $(PYTEST_ARGS)

table: $(READY)
	$(BIN)/python tests/simulator/table.py

lint: $(READY)
	$(BIN)/ruff check .
	$(BIN)/ruff format --check .
	$(BIN)/mypy

bench: $(READY)
	$(BIN)/python tests/benchmark/stimulus.py
	$(BIN)/python tests/benchmark/bench.py
	PYTHONPATH=tests/simulator $(BIN)/python tests/benchmark/vhdl.py

wheel: $(READY)
	$(BIN)/python -m pip wheel --quiet --no-deps --wheel-dir dist .

clean:
	rm -rf $(VENV) build dist tbkit-out *.egg-info
