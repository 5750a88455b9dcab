# make help

VENV := .venv
BIN := $(VENV)/bin
STAMP := $(VENV)/.installed
SOURCE := suspended_ctrl test benchmarks setup.py
RUN := OPENBLAS_NUM_THREADS=1 PYTHONUNBUFFERED=1

# The interpreter: what the caller says, else the first in range that can make environments. The
# plain python3 comes first since that is the one a sourced ROS belongs to.
PYTHON ?= $(shell for candidate in python3 python3.13 python3.12 python3.11 /usr/bin/python3; do \
    "$$candidate" -c 'import sys, venv, ensurepip; sys.exit(not (3, 11) <= sys.version_info < (3, 14))' \
        2>/dev/null && echo "$$candidate" && break; done)

# Numerical kernels are compiled when their module is first imported and kept on disk; done here
# once, nobody waits for it later.
define WARM
import importlib, pkgutil, sys
import suspended_ctrl
found = pkgutil.walk_packages(suspended_ctrl.__path__, 'suspended_ctrl.')
names = [module.name for module in found if not module.name.endswith('.__main__')]
for count, name in enumerate(names, 1):
    if sys.stdout.isatty():
        print(f'\rsetup: compiling kernels, module {count} of {len(names)} ', end='', flush=True)
    importlib.import_module(name)
print('\rsetup: kernels compiled, ready' + ' ' * 20)
endef
export WARM

.DEFAULT_GOAL := help
.PHONY: help setup demo test lint bench clean

help:  ## say what there is
	@sed -n 's/^\([a-z]*\):.*## /  make \1: /p' $(MAKEFILE_LIST) | sed 's/: /\t/' | expand -t 16

setup: $(STAMP)  ## make .venv with everything (done by the others first, when it is out of date)

$(STAMP): setup.py setup.cfg pyproject.toml Makefile
	@if [ -z "$(PYTHON)" ]; then \
	    echo 'setup: needs Python 3.11, 3.12 or 3.13 with its venv module' \
	        '(Debian, Ubuntu: apt install python3 python3-venv); another one: make PYTHON=/path' >&2; \
	    exit 3; \
	fi
	@set -e; \
	if [ -n "$$ROS_DISTRO" ] && "$(PYTHON)" -c 'import rclpy' 2>/dev/null; then \
	    echo "setup: ROS 2 $$ROS_DISTRO is sourced, its rclpy is used"; \
	    see=--system-site-packages; extras=test; \
	else \
	    echo 'setup: no ROS is sourced, ROS 2 comes from wheels'; \
	    see=; extras=test,ros,ament; \
	fi; \
	echo "setup: $$("$(PYTHON)" --version) into $(VENV), a few minutes the first time"; \
	"$(PYTHON)" -m venv --clear $$see $(VENV); \
	quiet=-qq; if [ -t 1 ]; then quiet=; fi; \
	$(BIN)/python -m pip install $$quiet --disable-pip-version-check --no-input --no-compile \
	    --editable ".[$$extras]"
	@$(RUN) $(BIN)/python -c "$$WARM"
	@touch $@

demo: setup  ## fly a raster over a panel through the real graph, and judge it
	@$(RUN) $(BIN)/suspended-ctrl rehearse config/missions/panel_pass_1p0.yaml --ros

lint: setup
	$(BIN)/ruff check .
	@for linter in ament_flake8 ament_pep257; do \
	    echo "$$linter $(SOURCE)"; \
	    $(BIN)/python -c "import $$linter" 2>/dev/null || { echo "$$linter: not installed, skipped"; continue; }; \
	    said=$$($(BIN)/python -m $$linter.main $(SOURCE) 2>&1) || { echo "$$said" | grep -v '^checking'; exit 1; }; \
	done
	$(BIN)/lint-imports --no-logo
	$(BIN)/mypy

test: lint  ## every check there is
	$(RUN) $(BIN)/python -m pytest

bench: setup  ## how long things take on this machine
	$(RUN) $(BIN)/python benchmarks/run.py

clean:  ## remove the environment and what the tools left
	rm -rf $(VENV) build dist ./*.egg-info .pytest_cache .mypy_cache .ruff_cache .hypothesis \
	    .import_linter_cache
	find . -name __pycache__ -type d -prune -exec rm -rf {} +
