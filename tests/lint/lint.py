"""House rules that a machine can check. Prints each breach with its place; exits 1 when there is one.

Every rule is tried on a snippet that breaks it, and on one that keeps it, before it is trusted: a rule that has
stopped working is a breach too.
"""
import pathlib
import re
import subprocess
import sys
from dataclasses import dataclass, field

ROOT = pathlib.Path(__file__).resolve().parents[2]
SOURCE = {".h", ".cpp", ".c"}
TEXT = SOURCE | {".py", ".sh", ".txt", ".cmake", ".json", ".toml", ".csv", ".md", ""}
TOP_LEVEL = {"CMakeLists.txt", "CMakePresets.json", "README.md", "DEVELOPERS.md", "driver", "sim", "tools",
             "tests", "profiles"}
LONGEST = 400  # lines of a source file in driver/, sim/ and tools/
OWN = "tests/lint/lint.py"  # holds every bad snippet


def awaited(text):
    """(offset, expression) of each co_await: what is awaited, up to the end of the call, without lambda bodies.

    Comments and the insides of strings are blanked first, so that nothing in them counts.
    """
    blank = lambda m: re.sub(r"[^\n]", " ", m[0]) if m[0][0] == "/" else m[0][0] + "_" * (len(m[0]) - 2) + m[0][0]
    text = re.sub(r'//[^\n]*|/\*.*?\*/|"(?:\\.|[^"\\\n])*"', blank, text, flags=re.S)
    for start in re.finditer(r"\bco_await\b", text):
        depth, body, out = 0, 0, []  # body: depth of the lambda body that is being skipped
        for at in range(start.end(), len(text)):
            c = text[at]
            if not body and (c == ";" or (c in ")]},{" and depth == 0 and not (c == "{" and "[" in "".join(out)))):
                break
            if c in "([{":
                depth += 1
                # "[...] {", "(...) {" and "-> Type {" open the body of a lambda
                if c == "{" and not body and re.search(r"(?:[\])]|mutable|->\s*[\w:<>, ]+)\s*$", "".join(out)):
                    body = depth
            if not body:
                out.append(c)
            if c in ")]}":
                if depth == body:
                    body = 0
                depth -= 1
        yield start.start(), "co_await" + "".join(out)


@dataclass
class Rule:
    what: str
    pattern: str
    bad: list[str]  # each must be caught
    good: list[str] = field(default_factory=list)  # none may be caught
    allowed: tuple[str, ...] = ()  # path prefixes that may break it
    kinds: set[str] = field(default_factory=lambda: SOURCE)
    in_await: bool = False  # the pattern is looked for in what is awaited only

    def find(self, text):
        """Offsets of the breaches in a whole file: statements may run over several lines."""
        if self.in_await:
            return [at for at, expression in awaited(text) if re.search(self.pattern, expression)]
        return [m.start() for m in re.finditer(self.pattern, text, re.M)]


RULES = [
    # Times are numbers and harmless.
    Rule("g++ 12 destroys an aggregate temporary in a co_await twice: name it first",
         r"[(,]\s*(?:\w+::)*(?!Nanoseconds\b|Instant\b)[A-Z]\w*(?:<[^<>;]*>)?\{\s*[^}\s]",
         ['co_await f(RelayRef{"a", 1});', "auto r = co_await g.close(permit,\n    description::RelayRef{name, 2});",
          "co_await f(1, std::vector<Options>(), Options{text});",
          "const auto x = std::move(co_await f(/* why; */ Options{text})).value();"],
         ['RelayRef relay{"a", 1};\nco_await f(relay);', "if (co_await f(x)) {\n  Options o{1};\n}",
          "co_await f(x);\ng(RelayRef{name, 2});", "if (auto r = co_await f(x)) g(RelayRef{name, 1});",
          "co_await waitFor(clock, Nanoseconds{5});", "// co_await f(Options{1});\n",
          "co_await f(guard, [&]() -> Task<Result<void>> {\n  f(Options{1});\n  co_return {};\n});"], in_await=True),
    Rule("g++ 12 destroys an aggregate temporary in a co_await twice: name it first",
         r"[(,]\s*\{\s*[^}\s]",
         ["co_await f({.a = 1});", "co_await f(x, {\n    .a = text, .n = 1});", 'co_await f({"a", 1});'],
         ["co_await f(x);\ng({1, 2});", "co_await f(x, {});", "if (auto r = co_await f(x)) g({1, 2});",
          "co_await f([]() -> Task<void> { g({1, 2}); co_return; });"], in_await=True),
    Rule("a capturing lambda called in the co_await dies too early: name it, or capture nothing",
         r"co_await\s+\[[^\]]+\]", ["co_await [s]() -> Task<> {}();", "co_await\n    [&]() -> Task<> {}();"],
         ["co_await [](int n) -> Task<> {}(1);"]),
    Rule("g++ 12 spoils captures of a lambda beside a co_await in one co_spawn: await in a statement of its own",
         r"co_spawn\((?:(?!;|\{).)*co_await|co_await\s+(?:\w+::)*co_spawn\(",
         ["co_spawn(co_await this_coro::executor, [s] {}, detached);", "co_await asio::co_spawn(e, [s] {}, use_awaitable);"],
         ["auto e = co_await this_coro::executor;\nco_spawn(e, f, detached);"]),
    Rule("captures of a lambda that is called in co_spawn die at once: hand the lambda over uncalled",
         r"(?s)co_spawn\([^;\[]*\[[^\]]+\](?:(?!\n\}).)*?\}\(\)",
         ["co_spawn(e, [s]() -> Task<> { co_return; }(), detached);"],
         ["co_spawn(e, [s]() -> Task<> { co_return; }, detached);"]),
    Rule("move assignment of Asio 1.81's handlers recurses: construct and swap",
         r"(?:->|\.|\b)handler_?\s*=\s*std::move\(|\w+->\w*[hH]andler_?\s*=\s*std::move\(",
         ["wait->handler = std::move(handler);", "handler_ = std::move(handler);"],
         ["Handler own(std::move(handler));\nown.swap(wait->handler);"]),
    Rule("time is passed in (Clock)", r"\b(?:system|steady|high_resolution)_clock::now\b|\bgettimeofday\b|\bclock_gettime\b",
         ["auto t = std::chrono::steady_clock::now();", "::clock_gettime(CLOCK_MONOTONIC, &t);"], ["clock.now()"],
         ("driver/core/clock.cpp", "tools/cli/demo.cpp", "tests/driver/core/clock_test.cpp", "tests/bench/",
          "tests/driver/recording/recorder_test.cpp")),
    Rule("chance is passed in (Random)", r"\brandom_device\b|\bs?rand\(\)|\bgetrandom\b", ["std::random_device{}()"],
         ["random.uniform(0, 1)"], ("tools/cli/bench_session.cpp",)),
    Rule("waits go through a Clock", r"\bsleep_(?:for|until)\b|\b(?:u|nano)?sleep\(",
         ["std::this_thread::sleep_for(x);", "::usleep(1000);"], ["co_await waitFor(clock, x);"],
         # Where another process or a host's own thread is waited for, which no Clock of ours can move.
         ("driver/plugin/session.cpp", "tests/driver/recording/recorder_test.cpp", "tests/scenario/processes_test.cpp")),
    Rule("an Asio timer stands outside the real clock's file", r"\b(?:steady|system|high_resolution)_timer\b",
         ["asio::steady_timer timer(context);"], [], ("driver/core/clock.cpp",)),
    Rule("unfinished by its own words", r"\b(?:TODO|FIXME|XXX)\b", ["// TODO later"], ['"/tmp/x.XXXXXX"'], (), TEXT),
    Rule("a path of one machine", r"(?<![\w./$}])/(?:work|root|home)\b(?=[/\"'\s)]|$)",
         ['open("/work/x")', "cd /root", "path=/home/someone/x"], ["relays/work/x", "$root/work", "beam/root strain"], (), TEXT),
]


def too_long(name, text):
    lines = text.count("\n") + (not text.endswith("\n"))
    if name.startswith(("driver/", "sim/", "tools/")) and lines > LONGEST:
        return [f"{name}: {lines} lines, at most {LONGEST}: one concept a file"]
    return []


def strangers(files):
    extra = sorted({f.split("/")[0] for f in files if not f.startswith(".")} - TOP_LEVEL)
    lacking = sorted(TOP_LEVEL - {f.split("/")[0] for f in files})
    return ([f"the top level is fixed; these do not belong there: {', '.join(extra)}"] if extra else []) + (
        [f"the top level is fixed; these are missing: {', '.join(lacking)}"] if lacking else [])


def unproved(guide, tests):
    """Compares the promises of the guide's table with the `proves P-xx` lines of the tests, both ways.

    @param guide  text of DEVELOPERS.md; a row is "| P-xx | promise | `file or folder`, ... |"
    @param tests  {path: text} of the test files
    """
    breaches, promised = [], {}
    for row in re.findall(r"^\| (P-\d\d) \|(.*)$", guide, re.M):
        if row[0] in promised:
            breaches.append(f"DEVELOPERS.md: {row[0]} is promised twice")
        promised[row[0]] = [p for p in re.findall(r"`([^`]+)`", row[1]) if p.startswith("tests/")]
    proven = {}
    for name, text in tests.items():
        for line in re.findall(r"^\s*(?://|#) proves (P-.*)$", text, re.M):
            for promise in re.findall(r"P-\d\d", line):
                proven.setdefault(promise, []).append(name)
    for promise, named in sorted(promised.items()):
        carriers = proven.get(promise, [])
        if not carriers:
            breaches.append(f"DEVELOPERS.md: no test proves {promise}")
        for path in named:
            if carriers and not any(c == path or (path.endswith("/") and c.startswith(path)) for c in carriers):
                breaches.append(f"DEVELOPERS.md: {path} is named for {promise} and does not carry it")
        for carrier in carriers:
            if not any(carrier == p or (p.endswith("/") and carrier.startswith(p)) for p in named):
                breaches.append(f"{carrier}: proves {promise}, whose row in DEVELOPERS.md does not name it")
    for promise in sorted(set(proven) - set(promised)):
        breaches.append(f"{proven[promise][0]}: proves {promise}, which DEVELOPERS.md does not promise")
    return breaches


def self_test():
    """What the rules miss of the bad, and catch of the good."""
    out = []
    for rule in RULES:
        out += [f"the rule \"{rule.what}\" misses {s!r}" for s in rule.bad if not rule.find(s)]
        out += [f"the rule \"{rule.what}\" wrongly catches {s!r}" for s in rule.good if rule.find(s)]
    row = "| P-01 | a promise | `tests/a_test.cpp` |\n"
    listing = [f"{t}/x" for t in TOP_LEVEL]
    proof = {"tests/a_test.cpp": "// proves P-01\n"}
    cases = {
        "a file of 401 lines": (too_long("driver/a.h", "\n" * 401), too_long("driver/a.h", "\n" * 400)),
        "a folder too many": (strangers(listing + ["extra/x"]), strangers(listing + [".ci/run"])),
        "a folder too few": (strangers(listing[1:]), strangers(listing)),
        "a promise without a test": (unproved(row, {}), unproved(row, proof)),
        "a proof without a promise": (unproved("", proof), []),
        "a proof in another file": (unproved(row, {"tests/b_test.cpp": "// proves P-01\n"}), []),
        "a promise made twice": (unproved(row + row, proof), []),
    }
    out += [f"the check for {what} misses it" for what, (bad, _) in cases.items() if not bad]
    out += [f"the check for {what} is wrong: {good}" for what, (_, good) in cases.items() if good]
    return [f"{OWN}: {line}" for line in out]


def listing():
    """Files of the project: what git tracks, or in an exported copy whatever is there."""
    try:
        out = subprocess.run(["git", "ls-files", "-z"], cwd=ROOT, capture_output=True, text=True)
        if out.returncode == 0 and out.stdout:
            return [f for f in out.stdout.split("\0") if f and (ROOT / f).is_file()]
    except FileNotFoundError:
        pass
    return [str(p.relative_to(ROOT)) for top in sorted(TOP_LEVEL)
            for p in ([ROOT / top] if (ROOT / top).is_file() else (ROOT / top).rglob("*")) if p.is_file()]


def main():
    breaches = self_test()
    files = listing()
    texts = {}
    for name in files:
        if pathlib.PurePath(name).suffix in TEXT and not name.startswith("tests/fuzz/corpus/"):
            texts[name] = (ROOT / name).read_text(encoding="utf-8", errors="replace")
    for name, text in texts.items():
        kind = pathlib.PurePath(name).suffix
        for rule in RULES:
            if kind in rule.kinds and name != OWN and not name.startswith(rule.allowed or ("\0",)):
                for at in rule.find(text):
                    breaches.append(f"{name}:{text.count(chr(10), 0, at) + 1}: {rule.what}")
        if kind in SOURCE:
            breaches += too_long(name, text)
    breaches += strangers(files)
    tests = {n: t for n, t in texts.items() if n.startswith("tests/") and n.endswith((".cpp", ".c"))}
    breaches += unproved(texts.get("DEVELOPERS.md", ""), tests)
    print("\n".join(breaches) or f"{len(files)} files, {len(RULES)} rules: clean")
    return 1 if breaches else 0


if __name__ == "__main__":
    sys.exit(main())
