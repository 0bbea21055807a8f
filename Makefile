# Two commands do everything: `make demo` and `make test`. Each makes its own .venv when there is none.
PYTHON ?= python3
VENV := .venv
BIN := $(VENV)/bin
OUT ?= demo-run

.PHONY: demo test clean evidence tables bench rehearsal

$(BIN)/fewnm: pyproject.toml requirements.lock
	$(PYTHON) -c "import sys; sys.exit('fewnm needs Python 3.11 or newer') if sys.version_info < (3, 11) else None"
	test -x $(BIN)/python || $(PYTHON) -m venv $(VENV)
	$(BIN)/python -m pip install --quiet --disable-pip-version-check --constraint requirements.lock --editable '.[test]'
	touch $@

demo: $(BIN)/fewnm
	$(BIN)/fewnm rank red-emitter --out $(OUT) --overwrite

test: $(BIN)/fewnm
	$(BIN)/ruff check .
	$(BIN)/ruff format --check .
	$(BIN)/mypy
	$(BIN)/lint-imports
	$(BIN)/python -m pytest -n 2 --dist loadfile

# The figures that the report, the README and docs/how-sure.md print, and the last two's pages;
# takes some minutes.
evidence: $(BIN)/fewnm
	$(BIN)/fewnm audit --out build/audit --overwrite
	cp build/audit/held_out_figures.csv datasets/held_out_figures.csv
	$(BIN)/python -m screening.how_sure

# Crystallites by tight binding; rows on record are kept, a run that was stopped goes on.
tables: $(BIN)/fewnm
	$(BIN)/python -m features.computed_dots

# Speed beside a plain pipeline; takes some minutes and writes docs/performance.md.
bench: $(BIN)/fewnm
	$(BIN)/python -m screening.bench docs/performance.md

# Discovery replayed for every policy; takes some minutes and writes docs/rehearsal.md.
rehearsal: $(BIN)/fewnm
	$(BIN)/fewnm rehearse --out build/rehearsal --overwrite
	cp build/rehearsal/rehearsal.md docs/rehearsal.md

clean:
	rm -rf $(VENV) build dist $(OUT)
