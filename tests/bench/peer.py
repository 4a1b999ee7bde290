#!/usr/bin/env python3
"""Times `cosetta classify` and a peer on the same CIF files, in turn, in one run.

    tests/bench/peer.py --oxides DIR --peer 'python3 script.py' [--count 300] [--rounds 3]

DIR holds *.jsonl.gz with one structure a line (cell, elements, frac). The structures are written as CIF files of space
group P1 into a temporary folder. The peer is given the file names as arguments and prints one JSON object a line with
its own `seconds` for each file, start-up and imports not counted. Ours is timed as a whole process with one thread.
"""
import argparse, glob, gzip, json, os, shlex, statistics, subprocess, tempfile, time

parser = argparse.ArgumentParser()
parser.add_argument("--oxides", required=True)
parser.add_argument("--peer", required=True)
parser.add_argument("--count", type=int, default=300)
parser.add_argument("--rounds", type=int, default=3)
parser.add_argument("--binary", default="target/release/cosetta")
options = parser.parse_args()

records = []
for name in sorted(glob.glob(os.path.join(options.oxides, "*.jsonl.gz"))):
    with gzip.open(name, "rt") as lines:
        records += [json.loads(line) for line in lines]
step = max(1, len(records) // options.count)
records = records[::step][: options.count]

with tempfile.TemporaryDirectory() as folder:
    files = []
    for record in records:
        path = os.path.join(folder, record["id"].replace("/", "_") + ".cif")
        names = ["_cell_length_a", "_cell_length_b", "_cell_length_c", "_cell_angle_alpha", "_cell_angle_beta", "_cell_angle_gamma"]
        text = "data_x\n" + "".join(f"{n} {v:.8f}\n" for n, v in zip(names, record["cell"]))
        text += "_symmetry_space_group_name_H-M 'P 1'\nloop_\n_symmetry_equiv_pos_as_xyz\n'x,y,z'\n"
        text += "loop_\n_atom_site_label\n_atom_site_type_symbol\n_atom_site_fract_x\n_atom_site_fract_y\n_atom_site_fract_z\n_atom_site_occupancy\n"
        for i, (e, x) in enumerate(zip(record["elements"], record["frac"])):
            text += f"{e}{i + 1} {e} {x[0]:.8f} {x[1]:.8f} {x[2]:.8f} 1\n"
        open(path, "w").write(text)
        files.append(path)
    atoms = statistics.mean(len(r["elements"]) for r in records)
    print(f"{len(files)} oxides, {atoms:.1f} atoms on average")
    ratios = []
    for turn in range(options.rounds):
        start = time.perf_counter()
        ours = subprocess.run([options.binary, "classify", "--jobs", "1", "--quiet", "--format", "jsonl", *files], capture_output=True, text=True)
        wall_ours = time.perf_counter() - start
        start = time.perf_counter()
        peer = subprocess.run([*shlex.split(options.peer), *files], capture_output=True, text=True)
        wall_peer = time.perf_counter() - start
        rows = [json.loads(line) for line in peer.stdout.splitlines()]
        own = sum(row["seconds"] for row in rows)
        answers = sum(json.loads(line)["status"] == "ok" for line in ours.stdout.splitlines())
        failures = sum("error" in row for row in rows)
        ratios.append(own / wall_ours)
        print(
            f"round {turn + 1}: ours {1e3 * wall_ours / len(files):.3f} ms a structure with start-up ({answers} answered), "
            f"peer {1e3 * own / len(files):.2f} ms without start-up and imports, {1e3 * wall_peer / len(files):.2f} ms with "
            f"({len(rows) - failures} answered); ratio {own / wall_ours:.1f} without the peer's start-up, {wall_peer / wall_ours:.1f} with"
        )
    print(f"median ratio {statistics.median(ratios):.1f}")
