#!/usr/bin/env python3
"""The house's rules on includes hold: folders are layers, arrows run one way, and the core stays pure."""
import pathlib
import re
import subprocess
import sys

ROOT = pathlib.Path(__file__).resolve().parent.parent

# Who may include whom: a folder's own files and these.
ALLOWED = {
    "config": [],
    "storage": ["config/"],
    "daemon/measure": ["config/", "storage/records.hpp"],
    "daemon/regulator": ["config/", "storage/records.hpp", "daemon/measure/"],
    "daemon/acquire": ["config/", "daemon/measure/block.hpp"],
    "daemon": ["config/", "storage/", "daemon/"],
    "tools": ["config/", "storage/", "daemon/measure/", "daemon/acquire/", "daemon/pipeline.hpp"],
}
# What the core may not know: clocks, files, logs, threads, databases.
IMPURE = re.compile(r"<(chrono|iostream|fstream|cstdio|thread|mutex|condition_variable|ctime|spdlog/.*|sqlite3\.h|boost/.*)>")
IMPURE_EXCEPT = {("daemon/regulator/excursion_figures.cpp", "cstdio")}  # snprintf, to word a reason
TOP_LEVEL = re.compile(r"^(\..*|CMakeLists\.txt|CMakePresets\.json|README\.md|DEVELOPERS\.md|LICENSE|daemon|storage|config|systemd|tests|tools)$")


def layer_of(path):
    folder = path.parent.as_posix()
    return folder if folder in ALLOWED else None


def faults():
    for path in sorted(p.relative_to(ROOT) for f in ("config", "storage", "daemon", "tools") for p in (ROOT / f).rglob("*.[ch]pp")):
        layer = layer_of(path)
        if layer is None:
            yield f"{path}: stands in no known folder"
            continue
        for number, line in enumerate((ROOT / path).read_text().splitlines(), 1):
            ours = re.match(r'#include "(.*)"', line)
            if ours:
                target = ours.group(1)
                if str(pathlib.PurePosixPath(target).parent) != layer and not any(target.startswith(a) for a in ALLOWED[layer]):
                    yield f"{path}:{number}: {layer} may not include {target}"
            impure = re.match(r"#include " + IMPURE.pattern, line)
            if impure and layer in ("daemon/measure", "daemon/regulator") and (path.as_posix(), impure.group(1)) not in IMPURE_EXCEPT:
                yield f"{path}:{number}: the core may not include <{impure.group(1)}>"
    tracked = subprocess.run(["git", "-C", str(ROOT), "ls-files"], capture_output=True, text=True, check=False)
    for name in sorted({line.split("/")[0] for line in tracked.stdout.splitlines()}):
        if not TOP_LEVEL.match(name):
            yield f"{name}: does not belong at the top level"


if __name__ == "__main__":
    found = list(faults())
    print("\n".join(found) or "the arrows run one way")
    sys.exit(1 if found else 0)
