PYTHON ?= python3
VENV   ?= .venv
BIN    := $(VENV)/bin
READY  := $(VENV)/.ready
unexport VIRTUAL_ENV
export UV_PYTHON_DOWNLOADS := never

.PHONY: rehearse test soak check bench lock

rehearse: $(READY)
	@mkdir -p runs
	@$(BIN)/polrig rehearse recipes/quarter-wave-plate.yaml --out runs/

test: $(READY)
	@$(BIN)/pytest -n 2

soak: $(READY)
	@$(BIN)/pytest -n 2 -m soak -rP

check: $(READY)
	@$(BIN)/ruff format --check --quiet .
	@$(BIN)/ruff check --quiet .
	@$(BIN)/mypy rigctl drivers/rigctl_drivers simulators/rigctl_sim
	@$(BIN)/mypy tests --exclude 'conftest\.py$$'
	@for file in tests/conftest.py tests/*/conftest.py; do $(BIN)/mypy $$file || exit 1; done
	@$(BIN)/lint-imports --no-cache
	@$(BIN)/python tests/scorecard.py

bench: $(READY)
	@for b in tests/bench/bench_*.py; do echo "== $$b"; $(BIN)/python $$b || exit 1; done

lock: $(READY)
	@$(BIN)/uv pip compile pyproject.toml --group dev --universal --generate-hashes --no-header --no-annotate --quiet -o requirements.lock

$(READY): pyproject.toml requirements.lock
	@test -x $(BIN)/uv || { $(PYTHON) -m venv $(VENV) && $(BIN)/python -m pip install -q 'uv>=0.8,<1'; }
	@$(BIN)/uv pip install --quiet --python $(BIN)/python --require-hashes -r requirements.lock
	@$(BIN)/uv pip install --quiet --python $(BIN)/python --no-deps --no-build-isolation -e .
	@touch $@
