"""Draws samples of archives again with the independent reader, and compares hash, depth and merged_at.

    python3 check_archives.py FILE.tar.zst ...

Needs Python, the zstd command, and the reader beside this file; it shares no code with the program
that made the archives. For each ensemble it takes the first exact and the first unfinished sample;
ensembles beyond SITES sites are named and left out, for the reader takes them too slowly. Exits with
1 at any difference and when nothing was compared.
"""

import csv, io, json, subprocess, sys, tarfile
from pathlib import Path

SITES = 5000
READER = Path(__file__).with_name("stream1.py")


def members(path):
    tar = subprocess.run(["zstd", "-dc", path], check=True, capture_output=True).stdout
    with tarfile.open(fileobj=io.BytesIO(tar)) as archive:
        return {entry.name: archive.extractfile(entry).read() for entry in archive}


def drawn(request):
    answer = subprocess.run([sys.executable, READER], input=json.dumps(request), check=True, capture_output=True, text=True)
    return json.loads(answer.stdout)


def sites(law):
    lattice = law["lattice"]
    if lattice["kind"] == "graph":
        return lattice["sites"]
    count = 2 if lattice["kind"] == "honeycomb" else 1
    for extent in lattice["extents"]:
        count *= extent
    return count


def main():
    compared = wrong = 0
    for path in sys.argv[1:]:
        files = members(path)
        record = json.loads(files["record.json"])
        for number, ensemble in enumerate(record["ensembles"]):
            place = f"ensembles/{number:04}/"
            if sites(ensemble["law"]) > SITES:
                print(f"{path}: ensemble {number}: left out, {sites(ensemble['law'])} sites")
                continue
            rows = list(csv.DictReader(io.StringIO(files[place + "samples.csv"].decode())))
            chosen = [next((row for row in rows if row["status"] == status), None) for status in ("exact", "unfinished")]
            for row in filter(None, chosen):
                request = {"seed": record["seed"], "law": ensemble["law"], "index": int(row["index"]), "depth_limit": ensemble["depth_limit"]}
                for name in ("graph", "held"):
                    if place + name + ".json" in files:
                        request[name] = json.loads(files[place + name + ".json"])
                answer = drawn(request)
                found = (answer["hash"], answer["depth"], answer["merged_at"], bool(answer["unfinished"]))
                known = (row["hash"], int(row["depth"]), int(row["merged_at"]), row["status"] == "unfinished")
                compared += 1
                if found != known:
                    wrong += 1
                    print(f"{path}: ensemble {number}, sample {row['index']}: recorded {known}, drawn {found}")
    print(f"{compared} samples drawn again by the independent reader, {wrong} different")
    return 1 if wrong or not compared else 0


if __name__ == "__main__":
    sys.exit(main())
