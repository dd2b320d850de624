"""Tells known vulnerabilities that the program really calls: govulncheck against golang.org/x/vulndb, without a network beyond the
module proxy. Fails on called findings in modules. Those of the standard library are printed: they are mended by the Go that a release
is built with, not here."""

import json, os, pathlib, subprocess, sys, tempfile

GOVULNCHECK = "golang.org/x/vuln/cmd/govulncheck@v1.9.0"
VULNDB = "golang.org/x/vulndb@v0.0.0-20261105234957-e22db6528018"
# Findings that are none, each with its reason.
NONE = {
    "GO-2026-6872": "echo v4 is mended in 4.16.3 by its own changelog; the report has no version for the v4 line",
    "GO-2026-6875": "as GO-2026-6872",
}


def database(out: pathlib.Path) -> None:
    """Lays the reports out as govulncheck reads them (go.dev/doc/security/vuln/database)."""
    with tempfile.TemporaryDirectory() as outside:  # without a go.mod around, a module is fetched by itself
        got = subprocess.run(["go", "mod", "download", "-json", VULNDB], cwd=outside, check=True, capture_output=True, text=True)
    source = pathlib.Path(json.loads(got.stdout)["Dir"]) / "data" / "osv"
    for name in ("ID", "index"):
        (out / name).mkdir()
    modules, vulns, newest = {}, [], ""
    for path in sorted(source.glob("*.json")):
        raw = path.read_text()
        entry = json.loads(raw)
        newest = max(newest, entry["modified"])
        (out / "ID" / path.name).write_text(raw)
        vulns.append({"id": entry["id"], "modified": entry["modified"], "aliases": entry.get("aliases", [])})
        for affected in entry.get("affected", []):
            modules.setdefault(affected["package"]["name"], {})[entry["id"]] = {"id": entry["id"], "modified": entry["modified"]}
    if len(vulns) < 4000:
        sys.exit(f"only {len(vulns)} reports were found in {VULNDB}")
    index = {"db": {"modified": newest}, "vulns": vulns, "modules": [{"path": p, "vulns": list(v.values())} for p, v in sorted(modules.items())]}
    for name, content in index.items():
        (out / "index" / f"{name}.json").write_text(json.dumps(content))
    print(f"{len(vulns)} reports of {VULNDB}")


def findings(db: pathlib.Path) -> dict:
    """Called findings: id -> (module, version, fixed, a function of ours that leads there)."""
    run = subprocess.run(["go", "run", GOVULNCHECK, "-db", db.as_uri(), "-format", "json", "./..."], capture_output=True, text=True)
    if run.returncode:
        sys.exit(run.stderr)
    decoder, text, at, called, read = json.JSONDecoder(), run.stdout, 0, {}, 0
    while text[at:].strip():
        at += len(text[at:]) - len(text[at:].lstrip())
        message, at = decoder.raw_decode(text, at)
        read += "osv" in message
        finding = message.get("finding", {})
        trace = finding.get("trace", [])
        if trace and trace[0].get("function"):  # a symbol that is reached, not only a module that is there
            called[finding["osv"]] = (trace[0]["module"], trace[0].get("version", ""), finding.get("fixed_version", ""), trace[-1].get("function", ""))
    if not read:
        sys.exit("govulncheck read no report at all")
    return called


def main() -> None:
    with tempfile.TemporaryDirectory() as folder:
        database(pathlib.Path(folder))
        found = findings(pathlib.Path(folder))
    bad = 0
    for name, (module, version, fixed, by) in sorted(found.items()):
        where = f"{name}: {module} {version}, mended in {fixed or 'no version'}, reached from {by}"
        if module == "stdlib":
            print("note", where)
        elif name in NONE:
            print("none", where, "-", NONE[name])
        else:
            bad += 1
            print("FOUND", where)
    print(f"{len(found)} called findings, {bad} to be mended")
    sys.exit(bad > 0)


if __name__ == "__main__":
    os.chdir(pathlib.Path(__file__).parent.parent)
    main()
