"""Runs the console examples of README.md and compares what they print.

Usage: readme_examples.py README.md

A fenced block marked `console` holds lines that start with `$ `, each followed by what it
prints. A line `...` stands for any lines; a run of `…` inside a line for any characters. Other
blocks are left alone.
"""

import re
import subprocess
import sys


def blocks(text):
    return re.findall(r"^```console\n(.*?)^```", text, re.M | re.S)


def commands(block):
    """Pairs of a command and the output shown below it."""
    found = []
    for line in block.splitlines():
        if line.startswith("$ "):
            found.append([line[2:], []])
        elif found and found[-1][0].endswith("\\"):
            found[-1][0] = found[-1][0][:-1].rstrip() + " " + line.strip()
        else:
            found[-1][1].append(line.rstrip())
    return found


def pattern(shown):
    """The regular expression that the shown lines stand for."""
    parts = []
    for line in shown:
        if line == "...":
            parts.append(r"(?:.*\n)*?")
        else:
            parts.append(".*?".join(re.escape(part) for part in re.split("…+", line)) + r"\n")
    return re.compile("".join(parts))


def main():
    text = open(sys.argv[1], encoding="utf-8").read()
    ran = failed = 0
    for block in blocks(text):
        for command, shown in commands(block):
            run = subprocess.run(
                ["bash", "-c", command], capture_output=True, text=True, timeout=300, check=False
            )
            printed = "".join(line.rstrip() + "\n" for line in run.stdout.splitlines())
            ran += 1
            if not pattern(shown).fullmatch(printed):
                failed += 1
                print(f"README shows for: {command}\n" + "\n".join(shown))
                print(f"but it printed:\n{printed}{run.stderr}")
    print(f"README examples: {ran} ran, {failed} failed")
    sys.exit(1 if failed or not ran else 0)


main()
