# Two commands: `make study` runs the demo study, `make test` runs the tests.
# Both make .venv first and install into it; the only things needed are make and Python 3.11+.

PYTHON ?= python3
VENV := .venv
BIN := $(VENV)/bin
PYTEST := $(BIN)/python -m pytest
# Files of tests side by side, one to a core; each file stays in one process.
PARALLEL := -n auto --dist loadfile

.PHONY: study test quick slow bench lint build clean help

help: ## show this list
	@grep -E '^[a-z]+:.*##' $(MAKEFILE_LIST) | sed -E 's/:.*##/:/' | column -t -s:

$(VENV)/.ready: pyproject.toml
	@$(PYTHON) -c 'import sys; sys.exit(sys.version_info < (3, 11))' || \
	  { echo "bayeslca needs Python 3.11 or newer; $(PYTHON) is `$(PYTHON) --version`. Use: make PYTHON=/path/to/python3.11 $(MAKECMDGOALS)"; exit 2; }
	$(PYTHON) -m venv $(VENV)
	$(BIN)/python -m pip install --quiet --upgrade "pip>=25.1"
	$(BIN)/python -m pip install --quiet --group dev --editable .
	@touch $@

study: $(VENV)/.ready ## run the demo study and say where the report is
	$(BIN)/bayeslca run examples/water_points/study.toml -o results/water_points --replace

test: $(VENV)/.ready ## run the whole test suite
	$(PYTEST) $(PARALLEL) tests/unit tests/statistical tests/slow

quick: $(VENV)/.ready ## run the fast tests only
	$(PYTEST) $(PARALLEL) tests/unit -m "not pymc and not browser"

bench: $(VENV)/.ready ## run the benchmarks
	$(PYTEST) tests/benchmarks --benchmark-only --benchmark-columns=median,iqr,rounds

lint: $(VENV)/.ready ## ruff, mypy --strict, and the rooms' import rules
	$(BIN)/ruff check .
	$(BIN)/ruff format --check .
	$(BIN)/mypy
	$(BIN)/lint-imports

build: $(VENV)/.ready ## build wheel and sdist into dist/
	$(BIN)/python -m build --outdir dist .

clean: ## remove what the other targets made
	rm -rf $(VENV) build dist results .mypy_cache .ruff_cache .pytest_cache .hypothesis .benchmarks
