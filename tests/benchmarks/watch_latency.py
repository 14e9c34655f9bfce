"""From the save of a file to its new record on disk, under `calcbook watch`.

Run with `python tests/benchmarks/watch_latency.py [file]`. The file is saved as editors do (a file beside, renamed
over the old one), again and again with another title; the time runs from the rename to the moment when the
record's new bytes can be read. Prints the shortest, the middle and the longest of them; the aim is well under
100 ms. Where the file was issued before, the same once more beside its book and issued copies, against which every
save is then compared.
"""

from __future__ import annotations

import os
import shutil
import signal
import statistics
import subprocess
import sys
import tempfile
import time
from pathlib import Path

ROOT = Path(__file__).resolve().parents[2]
SAVES = 30
PAUSE = 0.2


def latency(path: Path, record: Path, text: str, mark: str) -> float:
    """Seconds from a save to the record that holds its mark."""
    beside = path.with_name(path.name + "~")
    beside.write_text(text.replace("title: ", f"title: {mark} ", 1), encoding="utf-8")
    os.replace(beside, path)
    start = time.perf_counter()
    wanted = mark.encode()
    while wanted not in record.read_bytes():
        time.sleep(0.0005)
        if time.perf_counter() - start > 60.0:
            raise SystemExit("the record has not come")
    return time.perf_counter() - start


def main() -> None:
    source = Path(sys.argv[1]) if len(sys.argv) > 1 else ROOT / "calcs/wc-101.yaml"
    text = source.read_text(encoding="utf-8")
    number = text.split("number: ", 1)[1].split("\n", 1)[0].split("#")[0].strip()
    issued = ROOT / "output" / number / "issued"
    measure(source, text, number, None)
    if issued.is_dir():
        measure(source, text, number, issued)


def measure(source: Path, text: str, number: str, issued: Path | None) -> None:
    """Watch a copy of a file, alone or with its book, and print what its saves took."""
    with tempfile.TemporaryDirectory() as folder:
        path, output = Path(folder) / "calcs" / source.name, Path(folder) / "output"
        path.parent.mkdir()
        if issued is not None:
            shutil.copytree(source.parent, path.parent, dirs_exist_ok=True)
            shutil.copytree(issued, output / number / "issued")
        path.write_text(text, encoding="utf-8")
        process = subprocess.Popen(
            [sys.executable, "-m", "calcbook", "watch", str(path), "--output", str(output)],
            env={**os.environ, "PYTHONPATH": str(ROOT)},
            stdout=subprocess.DEVNULL,
        )
        try:
            record = output / number / "record.md"
            while not record.is_file():
                time.sleep(0.05)
                if process.poll() is not None:
                    raise SystemExit("watch has ended")
            times = []
            for save in range(SAVES):
                time.sleep(PAUSE)
                times.append(latency(path, record, text, f"Save {save:03d}"))
        finally:
            process.send_signal(signal.SIGINT)
            process.wait()
    beside = " beside its issued copies" if issued is not None else ""
    print(
        f"{SAVES} saves of {source.name}{beside}: shortest {1e3 * min(times):.0f} ms,"
        f" middle {1e3 * statistics.median(times):.0f} ms, longest {1e3 * max(times):.0f} ms"
    )


if __name__ == "__main__":
    main()
