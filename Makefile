# Every command a person needs. `make` alone lists them.

PYTHON ?= $(shell command -v python3.11 || command -v python3)
VENV := .venv
BIN := $(VENV)/bin
PIP := $(BIN)/python -m pip --disable-pip-version-check --quiet --quiet install --require-hashes --no-input

MAKEFLAGS += --no-print-directory
.DEFAULT_GOAL := help
.DELETE_ON_ERROR:

.PHONY: help run start test lint format lock benchmark clean

help: ## list these commands
	@sed -n 's/^\([a-z]*\):.*## \(.*\)/\1\t\2/p' $(firstword $(MAKEFILE_LIST)) | \
		while IFS="$$(printf '\t')" read -r name does; do printf '  make %-10s %s\n' "$$name" "$$does"; done

run: $(VENV)/run.stamp ## open the demo on 127.0.0.1:8000 (PORT=8001 for another port)
	@$(BIN)/python scripts/start.py --demo

start: $(VENV)/run.stamp ## start for real, with the settings of the environment (README, "A real start")
	@$(BIN)/python scripts/start.py

test: $(VENV)/test.stamp ## everything that is checked: lint, types, layout, tests on both engines and in the browser
	@$(BIN)/python scripts/run_tests.py

lint: $(VENV)/test.stamp ## lint, format, types, templates and layout, without the other tests
	@$(BIN)/python scripts/run_tests.py --lint

format: $(VENV)/test.stamp ## put the code into the one format
	@$(BIN)/ruff check --fix --quiet . || true
	@$(BIN)/ruff format .

lock: $(VENV)/test.stamp ## pin the libraries again after requirements.in or requirements-dev.in changed
	$(BIN)/uv pip compile --quiet --universal --python-version 3.11 --generate-hashes \
		--custom-compile-command "make lock" requirements.in -o requirements.txt
	$(BIN)/uv pip compile --quiet --universal --python-version 3.11 --generate-hashes \
		--custom-compile-command "make lock" -c requirements.txt requirements-dev.in -o requirements-dev.txt

benchmark: $(VENV)/test.stamp ## measure and print; nothing is judged by the clock
	@for script in tests/benchmarks/bench_*.py; do \
		name=$${script##*/}; echo "== $$name"; \
		$(BIN)/python -m tests.benchmarks.$${name%.py} || exit 1; \
	done

clean: ## remove what these commands made, except the book in data/
	rm -rf $(VENV) staticfiles test-results .ruff_cache .mypy_cache .hypothesis .benchmarks .test-databases
	find . -name __pycache__ -type d -prune -exec rm -rf {} +

# The stamps are older than a lock that changed, so the libraries are installed again then and only then.
$(VENV)/made.stamp:
	@scripts/make_environment.sh "$(PYTHON)" "$(VENV)"
	@touch $@

$(VENV)/run.stamp: requirements.txt $(VENV)/made.stamp
	@echo "Installing the libraries; the first time takes a minute or two."
	@$(PIP) -r requirements.txt
	@touch $@

$(VENV)/test.stamp: requirements-dev.txt $(VENV)/made.stamp
	@echo "Installing the libraries and the test tools; the first time takes a minute or two."
	@$(PIP) -r requirements-dev.txt
	@touch $@
