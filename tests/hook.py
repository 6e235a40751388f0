#!/usr/bin/env python3
"""Commits netlists through the real pre-commit framework, in a scratch repository.

usage: hook.py PROGRAM     (needs git, and `pre-commit` from PyPI on the path)
The hook for an installed binary is taken from this repository's own .pre-commit-hooks.yaml. A netlist with an odd number of
fingers is refused, with a message that a person can read; the mended one goes in. A part of a design has the design judged, once.
"""
import os
import shutil
import subprocess
import sys
import tempfile
from pathlib import Path

HERE = Path(__file__).resolve().parent.parent
DECK = """use: [builtin:ldmos]
netlists: [top.sp]
classes:
  ldn60: {kind: nmos, pins: [d, g, s, b], high_voltage: true, size: {width: w, length: l, fingers: nf}, fingers: {min: 2, multiple_of: 2}}
rails: {VSS: 0V, COIL: 0V..48V, GATE: 0V..5V}
"""
TOP = "* valve\n.include switch.sp\nX1 COIL GATE VSS switch\n"
PART = "* switch\n.subckt switch d g s\nM1 d g s s ldn60 w=60u l=0.6u nf={fingers}\n.ends\n"


def run(*command, folder, env, ok=True):
    done = subprocess.run(command, cwd=folder, env=env, capture_output=True, text=True)
    said = done.stdout + done.stderr
    if ok and done.returncode:
        sys.exit(f"{' '.join(command)} failed:\n{said}")
    return done.returncode, said


def main():
    program = Path(sys.argv[1]).resolve()
    with tempfile.TemporaryDirectory() as scratch:
        scratch = Path(scratch)
        (scratch / "bin").mkdir()
        shutil.copy(program, scratch / "bin" / "drainwise")
        author = {f"GIT_{who}_{what}": "hook@localhost" for who in ("AUTHOR", "COMMITTER") for what in ("NAME", "EMAIL")}
        env = {**os.environ, **author, "PATH": f"{scratch / 'bin'}{os.pathsep}{os.environ['PATH']}", "PRE_COMMIT_HOME": str(scratch / "home")}
        hooks = scratch / "hooks"
        hooks.mkdir()
        shutil.copy(HERE / ".pre-commit-hooks.yaml", hooks)
        run("git", "init", "-q", folder=hooks, env=env)
        run("git", "add", ".", folder=hooks, env=env)
        run("git", "commit", "-qm", "hooks", folder=hooks, env=env)
        revision = run("git", "rev-parse", "HEAD", folder=hooks, env=env)[1].strip()
        block = scratch / "block"
        block.mkdir()
        run("git", "init", "-q", folder=block, env=env)
        config = f"repos:\n  - repo: {hooks}\n    rev: {revision}\n    hooks: [{{id: drainwise-installed}}]\n"
        (block / ".pre-commit-config.yaml").write_text(config)
        (block / "drainwise.yaml").write_text(DECK)
        (block / "top.sp").write_text(TOP)
        (block / "switch.sp").write_text(PART.format(fingers=3))
        run("pre-commit", "install", folder=block, env=env)
        run("git", "add", ".", folder=block, env=env)
        code, said = run("git", "commit", "-m", "odd", folder=block, env=env, ok=False)
        print(said)
        if code == 0 or "M1 has a finger count of 3" not in said or said.count("finger-count") != 1:
            sys.exit("the odd finger count was not refused in readable words, once")
        (block / "switch.sp").write_text(PART.format(fingers=4))
        run("git", "add", "switch.sp", folder=block, env=env)
        code, said = run("git", "commit", "-m", "even", folder=block, env=env, ok=False)
        if code:
            sys.exit(f"the mended netlist was refused:\n{said}")
        print("pre-commit: an odd finger count is refused, the mended netlist goes in")


main()
