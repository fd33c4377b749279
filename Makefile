# roadworth: `make all` does the main job on the demo, `make test` checks it.
# Another study: make all STUDY=name   or   make all STUDY_FILE=/path/to/study.toml

STUDY ?= demo
STUDY_FILE ?= config/$(STUDY).toml
PYTHON ?= python3
VENV := .venv
RUN := $(VENV)/bin/python
export PYTHONPATH := $(CURDIR)
STAGES := geocode roads route cost join demand surplus sensitivity publish

# What pyproject.toml says is needed, in the versions of config/constraints.txt.
needs = $(RUN) -c 'import functools, sys, tomllib; \
  project = tomllib.load(open("pyproject.toml", "rb"))["project"]; \
  print(*functools.reduce(dict.get, sys.argv[1:], project), sep="\n")' $(1) > $(VENV)/needs.txt && \
  $(RUN) -m pip install --quiet --disable-pip-version-check --no-warn-script-location \
  -c config/constraints.txt -r $(VENV)/needs.txt

.DEFAULT_GOAL := help
.PHONY: all new test check bench validate iceland docs pdf compare clean help $(STAGES)

all: $(VENV)/ready  ## the whole flow for STUDY, ending with the report
	@$(RUN) -m pipeline all "$(STUDY_FILE)"

$(STAGES): $(VENV)/ready
	@$(RUN) -m pipeline $@ "$(STUDY_FILE)"

new: $(VENV)/ready  ## a commented study file and input folder: make new STUDY=name
	@$(RUN) -m pipeline new "$(STUDY)"

iceland: $(VENV)/ready  ## fetch a real country's roads and postal codes, then run the flow on them
	@$(RUN) data/iceland/fetch.py
	@$(RUN) -m pipeline all config/iceland.toml

test: $(VENV)/ready-test  ## the tests (a few minutes)
	$(RUN) -m pytest -n 2

check: $(VENV)/ready-test  ## ruff and mypy --strict
	$(VENV)/bin/ruff check .
	$(VENV)/bin/ruff format --check .
	$(VENV)/bin/mypy

bench: $(VENV)/ready-test  ## speed of reading and searching roads, as ratios, into docs/bench.md
	$(RUN) -m tests.bench.run

validate: $(VENV)/ready-validate  ## the slow checks against outside sources
	@sh tests/validation/debian.sh
	@sh tests/validation/engine.sh
	$(RUN) -m pytest -m "slow or outside" --validation-to=docs tests

docs: $(VENV)/ready  ## the reference documents that are made from the code
	@$(RUN) -m pipeline.template

pdf: $(VENV)/ready  ## the report as a tagged PDF (needs Chromium); PAPER=letter for that size
	@$(RUN) -m pipeline.publish.pdf "$(STUDY_FILE)" $(PAPER)

compare: $(VENV)/ready  ## two runs side by side: make compare A=data/demo B=data/other
	@$(RUN) -m pipeline compare $(A) $(B)

clean:  ## remove what the flow made for STUDY (inputs stay)
	rm -rf data/$(STUDY)/work data/$(STUDY)/output

help:  ## this list
	@echo "make all                       the invented demo, from visit records to the report"
	@echo "make new STUDY=lakeshore       a study of your own; then: make all STUDY=lakeshore"
	@echo "make all STUDY_FILE=my/park.toml"
	@echo "make compare A=data/demo B=data/lakeshore"
	@echo
	@grep -hE '^[a-z]+:.*##' $(MAKEFILE_LIST) | sed -E 's/^([a-z]+):.*## */  \1\t/' | expand -t 14
	@echo
	@echo "one stage, with those before it that are out of date:"
	@echo "  $(STAGES)"

$(VENV)/ready: pyproject.toml config/constraints.txt
	@echo "building the environment in $(VENV) (once; a minute or two)"
	@$(PYTHON) -c 'import sys; sys.exit(sys.version_info < (3, 11))' || \
	  { echo "error: Python 3.11 or later is needed; say which with PYTHON=python3.12"; exit 1; }
	@test -x $(RUN) || $(PYTHON) -m venv $(VENV)
	@$(call needs,dependencies)
	@touch $@

$(VENV)/ready-test: $(VENV)/ready
	@$(call needs,optional-dependencies test)
	@touch $@

$(VENV)/ready-validate: $(VENV)/ready-test
	@$(call needs,optional-dependencies validate)
	@touch $@
