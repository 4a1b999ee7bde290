#!/usr/bin/env python3
"""Times the CIF reader and a peer (the gemmi package, `pip install gemmi`) on the same bytes, in turn, one thread each.

    tests/bench/read.py PATH... [--rounds 5] [--repeats 10]   # MB/s of each over files in memory, and their ratio
    tests/bench/read.py --sizes [--megabytes 1,10,100,200]    # time per MB and peak memory on large files made for it

The first form takes only files that the peer reads at all; it refuses some that we read with a diagnostic. Each round
runs both, each in a process of its own, with `--repeats` passes over all files; the fastest pass counts. Compared are the
bare documents (blocks, tags, values) and, as further lines, what it takes to have structures: with us the operations of
the space group and the checks of the file against itself are part of that, with the peer they are not.

The second form makes files of three shapes in a temporary folder and handles each once in a process of its own,
loading included. Memory is the high-water mark of the process, start-up included, divided by the size of the file.
"""
import argparse, json, os, statistics, subprocess, sys, tempfile, time

MEGABYTE = 1_000_000


def main():
    parser = argparse.ArgumentParser(description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter)
    parser.add_argument("paths", nargs="*", metavar="PATH")
    parser.add_argument("--rounds", type=int, default=5)
    parser.add_argument("--repeats", type=int, default=10)
    parser.add_argument("--sizes", action="store_true")
    parser.add_argument("--megabytes", default="1,10,100,200")
    parser.add_argument("--limit", type=float, default=600.0, metavar="SECONDS", help="for one large file")
    parser.add_argument("--binary", help="the program of tests/bench/read.rs; built if not given")
    parser.add_argument("--peer", choices=["passes", "once", "readable"], help=argparse.SUPPRESS)
    options = parser.parse_args()
    if options.peer:
        return {"passes": peer_passes, "once": peer_once, "readable": peer_readable}[options.peer](options)
    if not options.paths and not options.sizes:
        parser.error("give folders or files, or --sizes")
    options.binary = options.binary or build()
    return compare_sizes(options) if options.sizes else compare_speeds(options)


def build():
    command = ["cargo", "bench", "--bench", "read", "--no-run", "--message-format", "json"]
    messages = subprocess.run(command, check=True, stdout=subprocess.PIPE, text=True).stdout.splitlines()
    return next(name for name in (json.loads(line).get("executable") for line in messages) if name)


def run(command, limit=None, **more):
    """The JSON object that a process prints, or None if it took too long. One thread."""
    environment = {**os.environ, "RAYON_NUM_THREADS": "1"}
    try:
        found = subprocess.run(command, env=environment, stdout=subprocess.PIPE, text=True, timeout=limit, **more)
    except subprocess.TimeoutExpired:
        return None
    return json.loads(found.stdout) if found.returncode == 0 else sys.exit(f"failed: {' '.join(command[:4])}\n{found.stdout}")


def peer_command(what, *words):
    return [sys.executable, os.path.abspath(__file__), "--peer", what, *words]


# Speed over many files.


def compare_speeds(options):
    files = find_files(options.paths)
    readable = run(peer_command("readable"), input="\n".join(files))
    print(f"{len(files)} files, {len(readable)} of them readable by the peer")
    ratios = {"document": [], "structure": []}
    for turn in range(options.rounds):
        ours = run([options.binary, *readable, "--repeats", str(options.repeats)])
        peer = run(peer_command("passes", "--repeats", str(options.repeats)), input="\n".join(readable))
        size = ours["bytes"] / MEGABYTE
        document, structure = min(ours["parse"]), min(ours["read"])
        ratios["document"].append(min(peer["document"]) / document)
        ratios["structure"].append(min(peer["structure"]) / structure)
        if turn == 0:
            print(f"{size:.2f} MB; structures: ours {ours['structures']}, peer {peer['structures']}")
        print(
            f"round {turn + 1}: document {size / document:.1f} MB/s, peer {size / min(peer['document']):.1f} MB/s, "
            f"ratio {ratios['document'][-1]:.2f}; "
            f"structure {size / structure:.1f} MB/s, peer {size / min(peer['structure']):.1f} MB/s, "
            f"ratio {ratios['structure'][-1]:.2f}",
            flush=True,
        )
    for what, found in ratios.items():
        print(f"median ratio, {what}: {statistics.median(found):.2f} ({min(found):.2f} to {max(found):.2f}); above 1 we are faster")


def find_files(paths):
    found = []
    for path in paths:
        if os.path.isdir(path):
            for folder, _, names in os.walk(path):
                found += [os.path.join(folder, name) for name in names if name.lower().endswith(".cif")]
        else:
            found.append(path)
    return sorted(found)


def peer_readable(options):
    import gemmi

    def is_readable(path):
        try:
            with open(path, "rb") as file:
                gemmi.cif.read_string(file.read())
            return True
        except (RuntimeError, ValueError):
            return False

    print(json.dumps([path for path in sys.stdin.read().split("\n") if is_readable(path)]))


def peer_passes(options):
    import gemmi

    files = []
    for path in sys.stdin.read().split("\n"):
        with open(path, "rb") as file:
            files.append(file.read())
    found = {"document": [], "structure": [], "structures": 0}
    for _ in range(options.repeats):
        start = time.perf_counter()
        for data in files:
            gemmi.cif.read_string(data)
        found["document"].append(time.perf_counter() - start)
        start = time.perf_counter()
        count = 0
        for data in files:
            for block in gemmi.cif.read_string(data):
                count += len(gemmi.make_small_structure_from_block(block).sites) > 0
        found["structure"].append(time.perf_counter() - start)
        found["structures"] = count
    print(json.dumps(found))


# Large files.


def reflections(file, size):
    """One block, one loop of reflections."""
    file.write("data_reflections\nloop_\n" + "".join(f"_refln_{n}\n" for n in ("index_h", "index_k", "index_l", "F_squared_calc", "F_squared_meas", "F_squared_sigma", "observed_status")))
    count = 0
    while file.tell() < size:
        rows = (f"{n % 41 - 20:4d} {n // 41 % 41 - 20:4d} {n // 1681:4d} {n * 7919 % 99991 / 10:12.2f} {n * 104729 % 99991 / 10:12.2f} {n % 97 / 10:10.2f} o\n" for n in range(count, count + 1000))
        file.write("".join(rows))
        count += 1000
    return f"{count} rows"


def blocks(file, size):
    """Many blocks, each with a small structure."""
    count = 0
    while file.tell() < size:
        file.write("".join(block(n) for n in range(count, count + 100)))
        count += 100
    return f"{count} blocks"


def block(n):
    edge = 4 + n % 1000 / 1000
    return (
        f"data_block_{n}\n_chemical_formula_sum 'Mg O'\n_cell_length_a {edge:.4f}(2)\n_cell_length_b {edge:.4f}(2)\n_cell_length_c {edge:.4f}(2)\n"
        "_cell_angle_alpha 90\n_cell_angle_beta 90\n_cell_angle_gamma 90\n_cell_formula_units_Z 4\n_space_group_name_H-M_alt 'F m -3 m'\n"
        "loop_\n_atom_site_label\n_atom_site_type_symbol\n_atom_site_fract_x\n_atom_site_fract_y\n_atom_site_fract_z\n_atom_site_occupancy\n"
        "Mg1 Mg2+ 0 0 0 1\nO1 O2- 0.5 0.5 0.5 1\n\n"
    )


def tags(file, size):
    """One block, nothing but tags with one value."""
    file.write("data_tags\n")
    count = 0
    while file.tell() < size:
        file.write("".join(f"_tag_{n:07d} {n % 1000 / 8}\n" for n in range(count, count + 1000)))
        count += 1000
    return f"{count} tags"


def compare_sizes(options):
    print("shape and content | size | ours parse | ours read | peer document, each as ms per MB and peak memory over file size")
    with tempfile.TemporaryDirectory() as folder:
        for shape in (reflections, blocks, tags):
            for megabytes in map(float, options.megabytes.split(",")):
                path = os.path.join(folder, "large.cif")
                with open(path, "w") as file:
                    content = shape(file, megabytes * MEGABYTE)
                runs = [run([options.binary, path, "--once", step], options.limit) for step in ("parse", "read")]
                runs.append(run(peer_command("once", path), options.limit))
                cells = " | ".join(cell(found, options.limit) for found in runs)
                print(f"{shape.__name__}, {content} | {os.path.getsize(path) / MEGABYTE:.1f} MB | {cells}", flush=True)


def cell(found, limit):
    if found is None:
        return f"more than {limit:.0f} s"
    memory = "" if found["peak"] is None else f", {found['peak'] / found['bytes']:.1f} x"
    return f"{1e3 * found['seconds'] / (found['bytes'] / MEGABYTE):.2f} ms/MB{memory}"


def peer_once(options):
    import gemmi

    path = options.paths[0]
    start = time.perf_counter()
    document = gemmi.cif.read_file(path)
    seconds = time.perf_counter() - start
    print(json.dumps({"bytes": os.path.getsize(path), "seconds": seconds, "count": len(document), "peak": peak_memory()}))


def peak_memory():
    try:
        with open("/proc/self/status") as status:
            return next(int(line.split()[1]) * 1024 for line in status if line.startswith("VmHWM:"))
    except (OSError, StopIteration):
        return None


if __name__ == "__main__":
    sys.exit(main())
