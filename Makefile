# The two commands of the README are `make study` and `make test`; the rest is for contributors.
PYTHON ?= python3
VENV   := .venv
BIN    := $(VENV)/bin
STUDY  ?= demo_study
SITES  ?= 300
EXAMPLES ?= 2000

# Compiled once here: otherwise every kernel start would compile the libraries anew.
INSTALL := $(BIN)/uv pip install --quiet --python $(BIN)/python --compile-bytecode

.PHONY: study test lint format demo-data bench calibrate faults fuzz clean help

help: ## list the targets
	@grep -E '^[a-z-]+:.*##' $(MAKEFILE_LIST) | sed 's/:.*##/\t/'

$(BIN)/uv:
	$(PYTHON) -m venv $(VENV)
	$(BIN)/python -m pip install --quiet uv

$(VENV)/installed: pyproject.toml | $(BIN)/uv
	$(INSTALL) --editable .
	@touch $@

$(VENV)/installed-test: pyproject.toml | $(BIN)/uv
	$(INSTALL) --editable '.[test]'
	@touch $@ $(VENV)/installed

study: $(VENV)/installed ## make a private environment and run the demo study
	@test -d $(STUDY) || $(BIN)/sitestudy new $(STUDY) --demo
	@$(BIN)/sitestudy run $(STUDY)

test: $(VENV)/installed-test ## install what tests need, run them all, workbooks included
	$(BIN)/python -m pytest -q -p no:nbval -n 2 tests
	$(BIN)/python -m pytest -q --nbval-lax --nbval-cell-timeout=300 workbooks
	@$(MAKE) --no-print-directory lint

lint: $(VENV)/installed-test ## style and types
	$(BIN)/ruff check .
	$(BIN)/ruff format --check .
	$(BIN)/mypy

format: $(VENV)/installed-test ## put the code in the house style
	$(BIN)/ruff check --fix .
	$(BIN)/ruff format .

demo-data: $(VENV)/installed ## make the demo study's data again from its seed
	$(BIN)/python data_demo/make_demo.py

bench: $(VENV)/installed-test ## measure speeds, each as a ratio within one run
	@for file in tests/benchmarks/bench_*.py; do echo "== $$file"; $(BIN)/python $$file || exit 1; done

calibrate: $(VENV)/installed-test ## hold the long-term correction against simulated sites (SITES=30 for a first look)
	$(BIN)/python tests/calibration/calibrate.py --sites $(SITES)

faults: $(VENV)/installed-test ## lay faults into the demo mast, print what each data check finds
	@$(BIN)/python tests/study/seeded_faults.py

fuzz: $(VENV)/installed-test ## dream up files and study.toml at length (EXAMPLES=2000 each)
	$(BIN)/python tests/fuzz/fuzz_reading.py --examples $(EXAMPLES)

clean: ## remove the environment and the demo study's output
	rm -rf $(VENV) $(STUDY) data_demo/results data_demo/handover
