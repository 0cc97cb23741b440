"""The shape of the core: imports run one way, and nothing heavy or loud comes along."""

import ast
import pathlib
import re
import subprocess
import sys

import pytest

REPOSITORY = pathlib.Path(__file__).parents[2]
CORE = REPOSITORY / "evalcore"
TESTS = REPOSITORY / "tests"

# each file may import only files before it; some are still to be written
ORDER = (
    "errors",
    "sources",
    "figures",
    "wording",
    "settings",
    "table",
    "sheet",
    "intake",
    "groups",
    "profile",
    "rounds",
    "draws",
    "schemes",
    "shares",
    "binomial",
    "one_sided",
    "probabilities",
    "calibration",
    "decisions",
    "ranking",
    "row_ranking",
    "measures",
    "cut_off_rule",
    "cut_off",
    "share_in_use",
    "preparation",
    "prepared",
    "nearest",
    "candidates",
    "bag_facts",
    "estimates",
    "model_variance",
    "intervals",
    "bootstrap_intervals",
    "resampled_t",
    "five_by_two",
    "exact_bootstrap",
    "statistic_formulas",
    "statistic",
    "power_law",
    "sample_size",
    "further_cases",
    "multiplicity",
    "paired_difference",
    "paired_tests",
    "comparison",
    "selection",
    "chance",
    "limit",
    "choice",
    "plan",
    "answers",
    "closed_form",
    "discriminants",
    "logistic_rounds",
    "trees",
    "exact_rounds",
    "fits",
    "tuning",
    "pipeline",
    "permuted",
    "engine",
    "cluster",
    "clusters",
    "judged",
    "judged_intervals",
    "together",
    "estimated",
    "learning_curve",
    "picked",
    "chance_check",
    "at_cut_off",
    "beside",
    "evaluation",
    "per_case",
    "winner",
    "other_intervals",
    "verdict",
    "evidence",
    "evidence_quoted",
    "outlook",
    "rehearsal",
    "answer",
    "limit_rows",
    "beside_answer",
    "checks_table",
    "checks_rounds",
    "checks_models",
    "checks_candidates",
    "checks_cut_off",
    "checks_learned",
    "checks_evidence",
    "findings",
    "files",
    "chunks",
    "record",
    "results",
    "worker",
    "final_model",
    "summary",
)
FILES = sorted(path.stem for path in CORE.glob("*.py") if path.stem != "__init__")


def imported(path: pathlib.Path) -> set[str]:
    """Full names of all modules a file imports, wherever in the file."""
    found = set()
    for node in ast.walk(ast.parse(path.read_text(encoding="utf-8"))):
        if isinstance(node, ast.Import):
            found |= {alias.name for alias in node.names}
        elif isinstance(node, ast.ImportFrom):
            assert node.level == 0, f"{path.name} imports relatively"
            found.add(node.module)
            # `from evalcore import estimates` names the module only here
            found |= {f"{node.module}.{alias.name}" for alias in node.names}
    return found


def calls(path: pathlib.Path) -> set[str]:
    """Names that are called, as written: `print`, `np.isclose`."""
    tree = ast.parse(path.read_text(encoding="utf-8"))
    return {ast.unparse(node.func) for node in ast.walk(tree) if isinstance(node, ast.Call)}


def test_every_file_has_its_place():
    assert set(FILES) <= set(ORDER)
    assert len(set(ORDER)) == len(ORDER)


@pytest.mark.parametrize("name", FILES)
def test_imports_run_one_way(name):
    earlier = ORDER[: ORDER.index(name)]
    ours = {
        module.split(".")[1]
        for module in imported(CORE / f"{name}.py")
        if module.startswith("evalcore.")
    }
    assert ours & set(FILES) <= set(earlier)


def test_the_package_itself_imports_nothing():
    assert imported(CORE / "__init__.py") == set()


@pytest.mark.parametrize("name", FILES)
def test_the_core_knows_no_screen(name):
    roots = {module.split(".")[0] for module in imported(CORE / f"{name}.py")}
    assert not roots & {"app", "streamlit", "altair", "typst", "vl_convert"}


@pytest.mark.parametrize("name", [name for name in FILES if name != "worker"])
def test_the_core_prints_nothing(name):
    assert "print" not in calls(CORE / f"{name}.py")


def test_importing_the_core_is_light():
    modules = [f"evalcore.{name}" for name in FILES if name != "worker"]
    heavy = ("streamlit", "altair", "sklearn")
    script = (
        f"import sys, importlib\nfor name in {modules}: importlib.import_module(name)\n"
        f"print([name for name in {heavy} if name in sys.modules])"
    )
    done = subprocess.run(
        [sys.executable, "-c", script], capture_output=True, text=True, cwd=REPOSITORY, check=True
    )
    assert done.stdout.strip() == "[]"


def test_no_comparison_that_passes_when_the_assert_is_forgotten():
    for path in TESTS.rglob("*.py"):
        banned = {name for name in calls(path) if re.search(r"(^|\.)(isclose|allclose)$", name)}
        assert not banned, f"{path.relative_to(TESTS)} calls {banned}"


def test_one_of_each_error():
    from evalcore import errors

    kinds = [errors.TableError, errors.PlanError, errors.RecordError]
    assert all(kind.__bases__ == (errors.EvalError,) for kind in kinds)
    assert errors.EvalError.__bases__ == (ValueError,)
