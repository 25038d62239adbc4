"""House rules that a machine can check. Prints each breach with its place; exits 1 when there is one.

Every rule is tried on a snippet that breaks it first, so that a rule that has stopped working is noticed.
"""
import pathlib
import re
import subprocess
import sys

ROOT = pathlib.Path(__file__).resolve().parents[2]
SOURCE = {".h", ".cpp", ".c"}

# pattern, what it is, a snippet that must be caught, which files may have it
RULES = [
    (r"co_await [^;{]*\((?:[^;()]*, )?[A-Z]\w*\{", "g++ 12 destroys an aggregate temporary in a co_await twice",
     'co_await f(RelayRef{"a", 1});', ()),
    (r"co_await [^;]*[({]\s*\.\w+ =", "g++ 12 destroys an aggregate temporary in a co_await twice",
     "co_await f({.a = 1});", ()),
    (r"co_await \[[^\]]+\]", "a capturing lambda called in a co_await dies too early", "co_await [s]() -> Task<> {}();", ()),
    (r"\w+->handler = std::move|\bhandler_? = std::move\(handler", "Asio 1.81's move assignment of handlers recurses",
     "wait->handler = std::move(handler);", ()),
    (r"system_clock::now|steady_clock::now", "time is passed in", "std::chrono::steady_clock::now()",
     ("driver/core/clock.cpp", "tools/", "tests/")),
    (r"random_device", "chance is passed in", "std::random_device{}()", ("tools/",)),
    (r"\bsleep_for\b", "waits go through a Clock", "std::this_thread::sleep_for(x)", ("driver/plugin/session.cpp",)),
    (r"\b(TODO|FIXME|XXX)\b", "unfinished by its own words", "// TODO later", ()),
    (r"[\"' (](/work/|/root/|/home/)", "a path of one machine", 'open("/work/x")', ()),
]
TOP_LEVEL = {"CMakeLists.txt", "CMakePresets.json", "README.md", "DEVELOPERS.md", "driver", "sim", "tools", "tests", "profiles"}


def tracked():
    out = subprocess.run(["git", "ls-files"], cwd=ROOT, capture_output=True, text=True)
    if out.returncode == 0 and out.stdout:
        return out.stdout.split("\n")[:-1]
    return [str(p.relative_to(ROOT)) for top in TOP_LEVEL for p in (ROOT / top).rglob("*") if p.is_file()]


def main():
    breaches = []
    for pattern, what, snippet, _ in RULES:
        if not re.search(pattern, snippet):
            breaches.append(f"tests/lint/lint.py: the rule \"{what}\" no longer catches {snippet!r}")
    files = tracked()
    for name in files:
        path = ROOT / name
        if path.suffix not in SOURCE or not path.is_file():
            continue
        lines = path.read_text(encoding="utf-8").split("\n")
        for number, line in enumerate(lines, 1):
            for pattern, what, _, allowed in RULES:
                if re.search(pattern, line) and not name.startswith(allowed):
                    breaches.append(f"{name}:{number}: {what}")
        if len(lines) > 450 and not name.startswith("tests/"):
            breaches.append(f"{name}: {len(lines)} lines; one concept a file")
    extra = {f.split("/")[0] for f in files if not f.startswith(".")} - TOP_LEVEL
    if extra:
        breaches.append(f"the top level is fixed; these do not belong there: {sorted(extra)}")
    promised = set(re.findall(r"^\| (P-\d\d) ", (ROOT / "DEVELOPERS.md").read_text(encoding="utf-8"), re.M))
    proven = set()
    for name in files:
        if name.startswith("tests/") and name.endswith(".cpp"):
            for line in (ROOT / name).read_text(encoding="utf-8").split("\n")[:5]:
                if "proves" in line:
                    proven |= set(re.findall(r"P-\d\d", line))
    for missing in sorted(promised - proven):
        breaches.append(f"DEVELOPERS.md: no test proves {missing}")
    for unknown in sorted(proven - promised):
        breaches.append(f"a test proves {unknown}, which DEVELOPERS.md does not promise")
    print("\n".join(breaches) or f"{len(files)} files, {len(promised)} promises: clean")
    return 1 if breaches else 0


if __name__ == "__main__":
    sys.exit(main())
