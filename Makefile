# Leafturn: every target below is a promise to whoever has just cloned this.
SHELL := /bin/bash
PYTHON ?= python3
VENV := .venv
BIN := $(VENV)/bin
STAMP := $(VENV)/.installed
ONLY ?=

.DEFAULT_GOAL := help
.PHONY: help setup demo test lint bench clean

help: ## list the targets
	@grep -hE '^[a-z]+:.*## ' $(MAKEFILE_LIST) | sed -E 's/^([a-z]+):.*## /  make \1\t/' | expand -t 18

setup: $(STAMP) ## make the virtual environment from the locked, hashed list

$(STAMP): requirements.lock pyproject.toml
	@$(PYTHON) -c 'import sys; sys.exit(sys.version_info < (3, 11))' || { echo "Leafturn needs Python 3.11 or newer; $(PYTHON) is older. Name another with: make setup PYTHON=python3.12"; exit 1; }
	@$(PYTHON) -c 'import venv, ensurepip' 2>/dev/null || { if [ "$$(id -u)" = 0 ] && command -v apt-get >/dev/null; then apt-get update -qq && apt-get install -y -qq python3-venv; else echo "Python's venv module is missing. Install Debian's package python3-venv, then run this again."; exit 1; fi; }
	$(PYTHON) -m venv $(VENV)
	$(BIN)/python -m pip install --quiet --disable-pip-version-check --require-hashes -r requirements.lock
	$(BIN)/python -m pip install --quiet --disable-pip-version-check --no-deps --no-build-isolation -e .
	@touch $@

demo: $(STAMP) ## run the main job on an invented district network; look at var/demo/index.html
	$(BIN)/leafturn demo

test: $(STAMP) ## all checks and tests (installs what they need when root)
	$(BIN)/python -m tests.run

lint: $(STAMP) ## style, types and the import contracts
	$(BIN)/ruff check .
	$(BIN)/ruff format --check .
	$(BIN)/mypy
	$(BIN)/lint-imports

bench: $(STAMP) ## measure ours beside its anchor, one JSON line a row (ONLY=name for one)
	$(BIN)/python -m tests.bench $(ONLY)

clean: ## remove what the targets above made
	rm -rf $(VENV) var dist
