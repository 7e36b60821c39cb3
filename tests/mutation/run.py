"""Mutation testing: are the tests of sky, device and study red when a line of them is wrong?

    pip install -e ".[dev,mutation]"
    python tests/mutation/run.py map                # which test runs which line; with --tests: those files anew
    python tests/mutation/run.py map --plain --tests tests/sky tests/device
    python tests/mutation/run.py run --count 400    # 400 mutants of each package; goes on where it was stopped
    python tests/mutation/run.py run --again        # those that lived once more, after new tests; see --budget
    python tests/mutation/run.py control            # are the tests that killed green without a mutant?
    python tests/mutation/run.py report --survivors # figures, and the diffs of what lived

cosmic-ray's operators make the mutants; each has a rank from the seed and its own line, so that the sample stays the
same where the code does. Left out are mutants in annotations, and those that any call at all would kill (`is` for `<`,
shifts of floats), since they flatter. A server imports the libraries once and forks a process for each mutant, which
imports yieldsim with the mutated source and runs the tests that run the mutated line, cheap ones first, until one is
red.
Compiled modules, and those whose constants they take in, are run as plain Python on tests that this leaves affordable.
"""

from __future__ import annotations

import argparse
import ast
import contextlib
import gc
import hashlib
import importlib.abc
import importlib.machinery
import importlib.util
import io
import json
import os
import resource
import signal
import sys
import tempfile
import time
import traceback
from collections import Counter, defaultdict
from collections.abc import Iterable, Iterator
from dataclasses import astuple, dataclass
from pathlib import Path
from types import CodeType, FrameType
from typing import Any

ROOT = Path(__file__).parents[2]
PACKAGES = ("sky", "device", "study")
TESTS = ("tests/sky", "tests/device", "tests/study")
#: Modules that are compiled, or whose constants compiled code takes in: their mutants are run as plain Python.
PLAIN = (
    "sky.kernel",
    "sky.kernel_layer",
    "sky.layer",
    "device.kernel",
    "device.points",
    "device.diode",
    "device.series",
)
SEED = 20
LONGEST = {False: 15.0, True: 3.0}  # s of processor time for one test, compiled and plain; longer ones are left out
BUDGET = 4.0  # s of processor time for a mutant's tests: those of its module's file, and as much for all others


# ---- mutants -----------------------------------------------------------------------------------------------------


@dataclass(frozen=True)
class Mutant:
    """One change of one line: where, by which operator, the how manieth of its kind in the module."""

    module: str
    operator: str
    occurrence: int
    line: int
    rank: str

    @property
    def package(self) -> str:
        return self.module.split(".")[0]


def path_of(module: str) -> Path:
    return ROOT / "yieldsim" / f"{module.replace('.', '/')}.py"


_ARITHMETIC, _BITS = {"Add", "Sub", "Mul", "Div", "FloorDiv", "Mod", "Pow"}, {"BitOr", "BitAnd", "BitXor"}
_SHIFTS = {"LShift", "RShift"}


def flatters(operator: str) -> bool:
    """Say whether any run of the line would kill the mutant, or the tool makes it twice."""
    parts = operator.split("/")[1].split("_")
    if parts[0] == "ReplaceBinaryOperator":
        return not any({parts[1], parts[2]} <= family for family in (_ARITHMETIC, _BITS, _SHIFTS))
    if parts[0] == "ReplaceComparisonOperator":
        return (parts[1] in ("Is", "IsNot")) != (parts[2] in ("Is", "IsNot"))
    if parts[0] == "ReplaceUnaryOperator":
        return parts[2] in ("Not", "Invert") and parts[1] != "Delete"
    return parts[0] in ("VariableInserter", "VariableReplacer")


def spans_without_effect(source: str) -> set[int]:
    """Return the (line, column) starts of everything that only type checkers read, as line * 1000 + column."""
    places: set[int] = set()
    for node in ast.walk(ast.parse(source)):
        parts: list[ast.AST | None] = []
        if isinstance(node, ast.FunctionDef):
            everyone = [*node.args.posonlyargs, *node.args.args, *node.args.kwonlyargs]
            parts = [node.returns, *(a.annotation for a in everyone)]
        elif isinstance(node, ast.AnnAssign):
            parts = [node.annotation]
        elif isinstance(node, ast.If) and isinstance(node.test, ast.Name) and node.test.id == "TYPE_CHECKING":
            parts = [node]
        for part in parts:
            if part is not None:
                lines = source.split("\n")
                for line in range(part.lineno, part.end_lineno + 1):  # type: ignore[attr-defined]
                    first = part.col_offset if line == part.lineno else 0  # type: ignore[attr-defined]
                    last = part.end_col_offset if line == part.end_lineno else len(lines[line - 1])  # type: ignore[attr-defined]
                    places.update(line * 1000 + column for column in range(first, last))
    return places


def mutants_of(module: str) -> Iterator[Mutant]:
    import cosmic_ray.plugins
    from cosmic_ray.ast import ast_nodes, get_ast

    source = path_of(module).read_text("utf-8")
    lines, idle = source.split("\n"), spans_without_effect(source)
    nodes = list(ast_nodes(get_ast(source)))
    for name in sorted(cosmic_ray.plugins.operator_names()):
        if flatters(name):
            continue
        operator, seen, count = cosmic_ray.plugins.get_operator(name)(), Counter[str](), 0
        for node in nodes:
            for start, _ in operator.mutation_positions(node):
                text = lines[start[0] - 1].strip()
                seen[text] += 1
                mark = "|".join((str(SEED), module, name, text, str(seen[text])))
                count += 1
                if start[0] * 1000 + start[1] not in idle and node.parent.type not in ("parameters", "import_from"):
                    yield Mutant(module, name, count - 1, start[0], hashlib.sha256(mark.encode()).hexdigest()[:16])


def mutate(mutant: Mutant) -> tuple[str, str] | None:
    """Return a module's source and the mutated one; None if that is no Python."""
    import cosmic_ray.plugins
    from cosmic_ray.mutating import mutate_code

    source = path_of(mutant.module).read_text("utf-8")
    changed = mutate_code(source, cosmic_ray.plugins.get_operator(mutant.operator)(), mutant.occurrence)
    try:
        tree = ast.dump(ast.parse(changed or ""))
    except SyntaxError:
        return None
    return (source, str(changed)) if tree != ast.dump(ast.parse(source)) else None


def changed_lines(source: str, changed: str) -> str:
    """Return what a mutant does, without line numbers: its name in the results."""
    import difflib

    rows = difflib.unified_diff(source.split("\n"), changed.split("\n"), lineterm="", n=0)
    return "\n".join(row for row in rows if not row.startswith(("---", "+++", "@@")))


def sample(package: str, count: int, out: Path) -> list[tuple[Mutant, str]]:
    """Return the mutants of a package that rank first, and what each changes; kept until a source changes."""
    files = sorted((ROOT / "yieldsim" / package).glob("*.py"))
    state = hashlib.sha256(b"".join(f.read_bytes() for f in files) + bytes(str(count), "ascii"))
    kept = out / f"sample-{package}.json"
    if kept.exists():
        found = json.loads(kept.read_text("utf-8"))
        if found["state"] == state.hexdigest():
            return [(Mutant(*fields), change) for fields, change in found["mutants"]]
    ranked = sorted((m for file in files for m in mutants_of(f"{package}.{file.stem}")), key=lambda m: m.rank)
    chosen: list[tuple[Mutant, str]] = []
    for mutant in ranked:
        if len(chosen) == count:
            break
        if pair := mutate(mutant):
            chosen.append((mutant, changed_lines(*pair)))
    record = {"state": state.hexdigest(), "of": len(ranked), "mutants": [(astuple(m), change) for m, change in chosen]}
    kept.write_text(json.dumps(record), "utf-8")
    return chosen


# ---- which test runs which line ----------------------------------------------------------------------------------


class TooSlowError(Exception):
    """A test that took more processor time than a mutant can be given."""


def _stop(_: int, frame: FrameType | None) -> None:
    raise TooSlowError


class Watch:
    """Plugin of pytest: contexts of coverage by test and by shared fixture, times of both, an end to slow ones."""

    def __init__(self, cover: Any, longest: float) -> None:
        self.cover, self.longest, self.now = cover, longest, ""
        self.seconds: dict[str, float] = {}
        self.shared: dict[str, list[str]] = {}
        self.shared_seconds: Counter[str] = Counter()
        self.failed: set[str] = set()

    def _switch(self, name: str) -> None:
        self.now = name
        self.cover.switch_context(name)

    def pytest_collection_modifyitems(self, items: list[Any]) -> None:
        for item in items:
            indices = getattr(getattr(item, "callspec", None), "indices", {})
            for name, definitions in item._fixtureinfo.name2fixturedefs.items():
                if definitions and definitions[-1].scope != "function":
                    key = f"fixture {definitions[-1].baseid}|{name}|{indices.get(name, '')}"
                    self.shared.setdefault(item.nodeid, []).append(key)

    def pytest_runtest_logstart(self, nodeid: str) -> None:
        signal.setitimer(signal.ITIMER_PROF, self.longest)
        self._switch(nodeid)
        self.seconds[nodeid] = -time.process_time()

    def pytest_runtest_logfinish(self, nodeid: str) -> None:
        signal.setitimer(signal.ITIMER_PROF, 0)
        self.seconds[nodeid] += time.process_time()
        self._switch("")

    def pytest_runtest_logreport(self, report: Any) -> None:
        if not report.passed:
            self.failed.add(report.nodeid)

    def fixture(self, fixturedef: Any, request: Any) -> Iterator[None]:
        if fixturedef.scope == "function":
            return (yield)
        before, start = self.now, time.process_time()
        key = f"fixture {fixturedef.baseid}|{fixturedef.argname}|{getattr(request, 'param_index', '')}"
        if not hasattr(request, "param"):
            key = key.rsplit("|", 1)[0] + "|"
        self._switch(key)
        try:
            return (yield)
        finally:
            taken = time.process_time() - start
            self.shared_seconds[key] += taken
            if before in self.seconds:
                self.seconds[before] -= taken
            self._switch(before)


def make_map(out: Path, plain: bool, tests: list[str]) -> None:
    """Run the tests once under coverage and write which of them run which line, and how long each takes."""
    import coverage
    import pytest

    data = out / f"map-{'plain' if plain else 'compiled'}.coverage"
    data.unlink(missing_ok=True)
    cover = coverage.Coverage(
        data_file=str(data), source=[str(ROOT / "yieldsim" / p) for p in PACKAGES], config_file=False
    )
    watch = Watch(cover, LONGEST[plain])
    Watch.pytest_fixture_setup = pytest.hookimpl(wrapper=True)(Watch.fixture)  # type: ignore[attr-defined]
    signal.signal(signal.SIGPROF, _stop)
    cover.start()
    pytest.main(["-q", "--no-header", "-p", "no:cacheprovider", "--tb=no", "-r", "fE", *tests], plugins=[watch])
    cover.stop()
    cover.save()
    found, names = cover.get_data(), [t for t in watch.seconds if t not in watch.failed]
    places = {name: i for i, name in enumerate(names)}
    users: dict[str, list[int]] = defaultdict(list)
    for name in names:
        for key in watch.shared.get(name, ()):
            users[key].append(places[name])
    lines: dict[str, dict[int, list[int]]] = {}
    for file in found.measured_files():
        module = ".".join(Path(file).relative_to(ROOT / "yieldsim").with_suffix("").parts)
        lines[module] = {
            line: sorted({i for c in contexts for i in ([places[c]] if c in places else users.get(c, []))})
            for line, contexts in found.contexts_by_lineno(file).items()
        }
    costs = [[name, round(watch.seconds[name], 4), sorted(watch.shared.get(name, ()))] for name in names]
    record = {"tests": costs, "shared": watch.shared_seconds, "lines": lines}
    kept = data.with_suffix(".json")
    if kept.exists() and tests != list(TESTS):
        record = merged(json.loads(kept.read_text("utf-8")), record)
    kept.write_text(json.dumps(record), "utf-8")
    print(f"{len(names)} tests mapped, {len(watch.failed)} left out", flush=True)


def merged(old: dict[str, Any], new: dict[str, Any]) -> dict[str, Any]:
    """Return a map with some tests mapped anew."""
    names = {name for name, _, _ in new["tests"]}
    stale = {i for i, (name, _, _) in enumerate(old["tests"]) if name in names}
    lines: dict[str, dict[str, list[int]]] = {
        module: {line: [i for i in tests if i not in stale] for line, tests in found.items()}
        for module, found in old["lines"].items()
    }
    for module, found in new["lines"].items():
        for line, tests in found.items():
            here = lines.setdefault(module, {}).setdefault(str(line), [])
            here.extend(len(old["tests"]) + i for i in tests)
    return {"tests": old["tests"] + new["tests"], "shared": old["shared"] | new["shared"], "lines": lines}


def choose(record: dict[str, Any], mutant: Mutant, budget: float) -> list[list[str]]:
    """Return the tests for a mutant within a budget: first those of its module's own file, then others by their price.

    Tests that run the line come before those that run another of the module, which tell of constants and of what a
    cache or the import ran for all.
    """
    by_line = record["lines"].get(mutant.module, {})
    here = set(by_line.get(str(mutant.line), ()))
    there = {i for tests in by_line.values() for i in tests} - here
    package, own = mutant.module.split(".", 1)
    paid: set[str] = set()

    def cost(i: int) -> float:
        _, seconds, shared = record["tests"][i]
        return float(seconds) + sum(record["shared"].get(key, 0.0) for key in shared if key not in paid)

    def is_own(i: int) -> bool:
        return str(record["tests"][i][0]).startswith(f"tests/{package}/test_{own}.py")

    groups: list[list[str]] = []
    for mine in (True, False):
        chosen: list[int] = []
        spent = 0.0
        for group in (here, there):
            for i in sorted((i for i in group if is_own(i) == mine), key=cost):
                if spent + cost(i) <= budget:
                    spent += cost(i)
                    paid.update(record["tests"][i][2])
                    chosen.append(i)
        order = list(dict.fromkeys(record["tests"][i][0].split("::")[0] for i in chosen))
        names = [record["tests"][i][0] for i in chosen]
        groups.append(sorted(names, key=lambda name: order.index(name.split("::")[0])))
    return [group for group in groups if group]


# ---- running -----------------------------------------------------------------------------------------------------


class Mutated(importlib.abc.MetaPathFinder, importlib.machinery.SourceFileLoader):
    """Gives the import of one module another source than its file has."""

    def __init__(self, module: str, changed: str) -> None:
        self.wanted, self.changed = f"yieldsim.{module}", changed
        super().__init__(self.wanted, str(path_of(module)))

    def find_spec(self, fullname: str, path: Any = None, target: Any = None) -> importlib.machinery.ModuleSpec | None:
        if fullname != self.wanted:
            return None
        return importlib.util.spec_from_file_location(fullname, self.path, loader=self)

    def get_code(self, fullname: str) -> CodeType:
        text = self.changed.replace("except CosmicRayTestingException", "except ZeroDivisionError")
        return compile(text, self.path, "exec", dont_inherit=True)


class Chosen:
    """Plugin of pytest: only the chosen tests in their order; no shrinking of what Hypothesis finds."""

    def __init__(self, tests: list[str], pipe: int) -> None:
        self.order, self.pipe = {name: i for i, name in enumerate(tests)}, pipe

    def pytest_sessionstart(self) -> None:
        from hypothesis import Phase, settings

        settings.register_profile(
            "mutation", settings.get_profile("ci"), phases=(Phase.explicit, Phase.generate), report_multiple_bugs=False
        )
        settings.load_profile("mutation")

    def pytest_collection_modifyitems(self, items: list[Any]) -> None:
        items[:] = sorted((i for i in items if i.nodeid in self.order), key=lambda i: self.order[i.nodeid])

    def pytest_runtest_logreport(self, report: Any) -> None:
        if report.failed:
            os.write(self.pipe, json.dumps(["killed", report.nodeid]).encode())
            os._exit(0)


def child(mutant: Mutant, changed: str, groups: list[list[str]], pipe: int) -> None:
    """Import the mutated package, run the tests in this process and write into the pipe what became of it."""
    import numba

    numba.config.DISABLE_JIT = mutant.module in PLAIN  # read where a function is decorated
    if mutant.operator == "core/RemoveDecorator" and mutant.module in PLAIN:  # what shows only where it is compiled
        numba.config.DISABLE_JIT, numba.config.CACHE_DIR = False, tempfile.mkdtemp(dir=ROOT / "outputs" / "mutation")
    sys.meta_path.insert(0, Mutated(mutant.module, changed))
    for tests in groups:
        files = dict.fromkeys(name.split("::")[0] for name in tests)
        code = pytest_quietly(["-x", *files], [Chosen(tests, pipe)])
        if code != 0:  # no test failed, or it would have ended this process: a file cannot be imported, if not worse
            os.write(pipe, json.dumps(["killed" if code in (1, 2, 4) else f"error {code}", ""]).encode())
            return
    os.write(pipe, json.dumps(["survived", ""]).encode())


def pytest_quietly(arguments: list[str], plugins: list[Any]) -> int:
    import pytest

    options = ["-q", "-p", "no:cacheprovider", "--tb=no", "-W", "ignore::pytest.PytestAssertRewriteWarning"]
    with contextlib.redirect_stdout(io.StringIO()), contextlib.redirect_stderr(io.StringIO()):
        return int(pytest.main([*options, *arguments], plugins=plugins))


def attempt(mutant: Mutant, changed: str, tests: list[list[str]], budget: float) -> tuple[str, str]:
    """Run one mutant in a process of its own; stopped by its processor time, or by ten times that on the clock."""
    if not tests:
        return "no tests", ""
    reader, writer = os.pipe()
    seconds = int(4 * budget + 10)
    process = os.fork()
    if process == 0:
        os.close(reader)
        os.setpgid(0, 0)
        resource.setrlimit(resource.RLIMIT_CPU, (seconds, seconds))
        signal.alarm(10 * seconds)
        null = os.open(os.devnull, os.O_WRONLY)
        os.dup2(null, 1)
        os.dup2(null, 2)
        try:
            child(mutant, changed, tests, writer)
        except BaseException:
            os.write(writer, json.dumps(["error", traceback.format_exc()[-400:]]).encode())
        os._exit(0)
    os.close(writer)
    with os.fdopen(reader, "rb") as pipe:
        said = pipe.read()
    _, status = os.waitpid(process, 0)
    if os.WIFSIGNALED(status):
        return ("timeout" if os.WTERMSIG(status) in (signal.SIGXCPU, signal.SIGALRM, signal.SIGKILL) else "killed"), ""
    verdict, first = json.loads(said)
    return verdict, first


def warm_up() -> None:
    """Collect all tests once, so that libraries are there, then forget what each mutant must import anew."""
    code = pytest_quietly(["--collect-only", *TESTS], [])
    if code:
        raise SystemExit(f"pytest cannot collect the tests (exit code {code})")
    pytest_quietly(["tests/device/test_points.py", "tests/sky/test_perez_1990.py"], [])
    for name in [n for n in sys.modules if n.split(".")[0] in ("yieldsim", "tests", "conftest")]:
        del sys.modules[name]
    gc.collect()
    gc.freeze()  # a child need not go through all of it again when pytest ends


def results(out: Path) -> dict[tuple[str, str], dict[str, Any]]:
    """Return what is known of each mutant by module and change, the last word of each."""
    file = out / "results.jsonl"
    rows = [json.loads(row) for row in file.read_text("utf-8").splitlines()] if file.exists() else []
    return {(r["module"], r["change"]): r for r in rows}


def run(out: Path, count: int, budget: float, again: bool, only: Iterable[str]) -> None:
    """Run the mutants of the sample that have no verdict yet (or survived, to try them again)."""
    records = [json.loads((out / f"map-{mode}.json").read_text("utf-8")) for mode in ("compiled", "plain")]
    known = results(out)
    samples = [sample(package, count, out) for package in PACKAGES]
    warm_up()
    for mutant, change in (m for row in zip(*samples, strict=True) for m in row):  # stopped early, still even
        if only and mutant.module not in only:
            continue
        before = known.get((mutant.module, change))
        if before and not (again and before["verdict"] != "timeout" and not before["by"]):
            continue
        _, changed = mutate(mutant) or ("", "")
        tests = choose(records[mutant.module in PLAIN], mutant, budget)
        start = time.monotonic()
        verdict, first = attempt(mutant, changed, tests, budget)
        row = {
            "module": mutant.module, "line": mutant.line, "operator": mutant.operator, "change": change,
            "verdict": verdict, "by": first, "tests": sum(map(len, tests)),
            "seconds": round(time.monotonic() - start, 1),
        }  # fmt: skip
        with (out / "results.jsonl").open("a", encoding="utf-8") as file:
            file.write(json.dumps(row) + "\n")


def control(out: Path) -> None:
    """Run every test that killed a mutant on the code as it is, compiled and plain, and print those that are red."""
    warm_up()
    for plain in (False, True):
        killers = sorted({r["by"] for r in results(out).values() if r["by"] and (r["module"] in PLAIN) == plain})
        untouched = Mutant(PLAIN[0] if plain else "sky.sun", "none", 0, 0, "")
        source = path_of(untouched.module).read_text("utf-8")
        left = killers
        while left:
            verdict, red = attempt(untouched, source, [left], 600.0)
            if verdict != "killed":
                break
            print(f"red without a mutant: {red}", flush=True)
            left = [name for name in left if name != red]
        how = "as plain Python" if plain else "compiled"
        print(f"{len(left)} of {len(killers)} killers are green {how}", flush=True)


def report(out: Path, count: int, survivors: bool) -> None:
    """Print how many of the sample died, by package, and who lived."""
    known = results(out)
    for package in PACKAGES:
        tally, lived = Counter[str](), []
        for mutant, change in sample(package, count, out):
            row = known.get((mutant.module, change))
            tally[row["verdict"] if row else "not run"] += 1
            if row and row["verdict"] not in ("killed", "timeout"):
                lived.append((mutant, row))
        done = sum(tally.values()) - tally["not run"]
        dead = tally["killed"] + tally["timeout"]
        print(f"  {done} run, {dead} dead ({100 * dead / max(done, 1):.1f} %): {dict(tally)}")
        for mutant, row in sorted(lived, key=lambda pair: (pair[0].module, pair[0].line)) if survivors else ():
            print(f"yieldsim/{mutant.module.replace('.', '/')}.py:{mutant.line} {row['verdict']}\n{row['change']}")


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter)
    parser.add_argument("verb", choices=("map", "run", "control", "report"))
    parser.add_argument("--out", type=Path, default=ROOT / "outputs" / "mutation")
    parser.add_argument("--count", type=int, default=400, help="mutants of each package")
    parser.add_argument("--plain", action="store_true", help="with map: compiled modules as plain Python")
    parser.add_argument("--budget", type=float, default=BUDGET, help="seconds of tests for a mutant")
    parser.add_argument("--again", action="store_true", help="try survivors again, after new tests")
    parser.add_argument("--only", nargs="*", default=(), help="modules, such as sky.sun")
    parser.add_argument("--survivors", action="store_true", help="with report: who lived")
    parser.add_argument("--tests", nargs="*", default=TESTS, help="with map: folders or files of tests")
    args = parser.parse_args()
    os.chdir(ROOT)
    sys.path.insert(0, str(ROOT))
    args.out.mkdir(parents=True, exist_ok=True)
    os.environ.setdefault("OPENBLAS_NUM_THREADS", "1")
    if args.plain:
        os.environ["NUMBA_DISABLE_JIT"] = "1"
    if args.verb == "map":
        make_map(args.out, args.plain, list(args.tests))
    elif args.verb == "run":
        run(args.out, args.count, args.budget, args.again, args.only)
    elif args.verb == "control":
        control(args.out)
    else:
        report(args.out, args.count, args.survivors)


if __name__ == "__main__":
    main()
