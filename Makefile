# Two commands on a fresh machine: `make demo` builds the demo bed, `make test` passes the tests.
PYTHON ?= python3
VENV   := .venv
BIN    := $(VENV)/bin
DEMO   := demo_samples/kestrel_bight

.PHONY: demo test quick lint bench clean setup
.DEFAULT_GOAL := help

help:
	@echo "make demo    set up, then build the demo's bed"
	@echo "make test    set up, then lint, type-check and run every test"
	@echo "make quick   the tests without the slow ones"
	@echo "make lint    ruff and mypy"
	@echo "make bench   speed and memory against reference libraries"
	@echo "make clean   remove the environment and the demo's output"

# The stamp depends on what decides the environment, so that a changed pin is installed.
setup: $(VENV)/.done
$(VENV)/.done: pyproject.toml constraints.txt
	@$(PYTHON) -c 'import sys; v = sys.version_info[:2]; sys.exit(0 if v == (3, 11) else "make: %s is Python %d.%d; Seabed Texture is tested on Python 3.11 only; run: make PYTHON=python3.11" % ((sys.executable,) + v))'
	@$(PYTHON) -m venv $(VENV)
	$(BIN)/python -m pip install --quiet --disable-pip-version-check -c constraints.txt hatchling editables setuptools wheel
	$(BIN)/python -m pip install --quiet --disable-pip-version-check --no-build-isolation -c constraints.txt -e '.[test]'
	@echo "compiling once, on the demo's forty places"
	@$(BIN)/texture build $(DEMO)/recipe.toml --output $(VENV)/compiled --overwrite --quiet --set target.file=places.csv \
	  --set target.mask= --set rim= --set outputs.names= --set validation.count=2
	@touch $@

demo: setup
	$(BIN)/texture build $(DEMO)/recipe.toml --overwrite

test: lint
	$(BIN)/python -m pytest -n 2 --dist loadfile

quick: setup
	$(BIN)/python -m pytest -m "not slow"

lint: setup
	$(BIN)/ruff check .
	$(BIN)/ruff format --check .
	$(BIN)/mypy

bench: setup
	$(BIN)/python -m benchmarks

clean:
	rm -rf $(VENV) $(DEMO)/out .mypy_cache .ruff_cache .pytest_cache .hypothesis
