#!/usr/bin/env python3
"""Compares cell, operations and listed sites of CIFs with what a general-purpose library (gemmi, `pip install gemmi`) reads.

    tests/bench/compare.py PATH... [--binary PROGRAM]    # PROGRAM: that of tests/bench/read.rs; built if not given

Every block that one of the two reads is compared; every difference is printed, and the counts. Tolerances: 1e-9 of a
cell parameter and of an occupancy, 1e-9 of a coordinate. Elements are compared with deuterium taken for hydrogen.
"""
import argparse, collections, json, os, subprocess, sys

import gemmi


def main():
    parser = argparse.ArgumentParser(description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter)
    parser.add_argument("paths", nargs="+", metavar="PATH")
    parser.add_argument("--binary")
    options = parser.parse_args()
    command = [options.binary] if options.binary else ["cargo", "bench", "--quiet", "--bench", "read", "--"]
    text = subprocess.run(command + options.paths + ["--list"], check=True, capture_output=True, text=True).stdout
    ours = collections.OrderedDict()
    for line in text.splitlines():
        found = json.loads(line)
        ours.setdefault(found["file"], []).append(found)
    counts = collections.Counter()
    for path, blocks in ours.items():
        counts["files"] += 1
        for words in differences(path, blocks, counts):
            print(f"{os.path.basename(path)}: {words}")
    print(", ".join(f"{name}: {count}" for name, count in counts.items()))


def differences(path, blocks, counts):
    try:
        document = gemmi.cif.read_file(path)
    except Exception as error:
        counts["files the library refuses"] += 1
        return [f"the library refuses it: {str(error).splitlines()[0]}; ours: {blocks[0].get('refusal', 'read')}"]
    theirs = {block.name: block for block in document}
    found = []
    for own in blocks:
        block = theirs.get(own["block"])
        if block is None:
            found.append(f"block {own['block']} is unknown to the library")
            continue
        counts["blocks"] += 1
        if "refusal" in own:
            counts["blocks we refuse"] += 1
            found.append(f"refused: {own['refusal']}")
            continue
        small = gemmi.make_small_structure_from_block(block)
        for what, words in (
            ("cells", compare_cells(own, small)), ("operations", compare_operations(own, small)), ("sites", compare_sites(own, small)),
        ):
            counts[f"equal {what}"] += words is None
            if words:
                found.append(f"{what}: {words}")
    return found


def compare_cells(own, small):
    cell = small.cell.parameters
    if all(abs(a - b) <= 1e-9 * abs(b) for a, b in zip(own["cell"], cell)):
        return None
    return f"{own['cell']} against {list(cell)}"


def compare_operations(own, small):
    theirs = list(small.symops)
    if not theirs:
        group = small.spacegroup
        if group is None:
            return f"the library knows none (symbol '{small.spacegroup_hm}'), ours are {len(own['operations'])}"
        theirs = [operation.triplet() for operation in group.operations()]
    a = {normal(text) for text in own["operations"]}
    b = {normal(text) for text in theirs}
    return None if a == b else f"{len(a)} against {len(b)}, {len(a & b)} in common"


def normal(text):
    return gemmi.Op(text).wrap().triplet()


def compare_sites(own, small):
    theirs = [site for site in small.sites]
    if len(own["sites"]) != len(theirs):
        return f"{len(own['sites'])} against {len(theirs)}"
    for (label, element, position, occupancy), site in zip(own["sites"], theirs):
        name = "H" if site.element.name == "D" else site.element.name
        if element != name:
            return f"{label} is {element} against {name}"
        if any(abs(a - b) > 1e-9 for a, b in zip(position, site.fract.tolist())):
            return f"{label} is at {position} against {site.fract.tolist()}"
        if abs(occupancy - site.occ) > 1e-9:
            return f"{label} has occupancy {occupancy} against {site.occ}"
    return None


if __name__ == "__main__":
    sys.exit(main())
