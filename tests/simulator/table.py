"""``make table``: every right and every faulty decoder under the built-in regression, what was found and the time taken."""

from __future__ import annotations

import sys
import tempfile
import time
from pathlib import Path

from harness import decoder_files, kinds_found, mutated, need, play, short_part, whole
from mutants import EXAMPLES, MUTANTS, UNSEEN

from tbkit.contract_file import read_contract


def main() -> int:
    """Print both tables; returns 1 if a right decoder failed or a faulty one of the first table passed."""
    wrong = 0
    files = [
        *decoder_files("verilog"),
        *(EXAMPLES / f"{name}.yaml" for name in ("spindle", "traverse", "knob")),
        *decoder_files("vhdl"),
    ]
    with tempfile.TemporaryDirectory() as name:
        folder = Path(name)
        print(f"{'right decoder':24} {'simulator':16} {'profiles':>8} {'edges':>8} {'compared':>9} {'seconds':>8}  verdict")
        for file in files:
            contract = read_contract(file)
            simulator = need("ghdl" if contract.design.language == "vhdl" else "icarus")
            begin = time.perf_counter()
            results = play(contract, whole(contract), simulator, folder)
            seconds = time.perf_counter() - begin
            ran = [one for one in results.profiles if one.score]
            edges, compared = sum(one.edges for one in ran), sum(one.comparisons for one in ran)
            print(
                f"{file.stem:24} {simulator!s:16} {len(ran):>8} {edges:>8} {compared:>9} {seconds:>8.1f}  {results.verdict}",
                flush=True,
            )
            wrong += results.verdict != "pass"
        print(f"\n{'faulty decoder':42} {'simulator':16} {'seconds':>8}  found")
        caught = 0
        for mutant in (*MUTANTS, *UNSEEN):
            contract = mutated(mutant, folder / mutant.name)
            simulator = need("ghdl" if mutant.vhdl else "icarus")
            begin = time.perf_counter()
            results = play(contract, short_part(contract) if mutant in MUTANTS else whole(contract), simulator, folder)
            seconds = time.perf_counter() - begin
            found = ", ".join(sorted(kinds_found(results.profiles))) or "nothing"
            print(f"{mutant.name:42} {simulator!s:16} {seconds:>8.1f}  {found}", flush=True)
            caught += results.verdict == "fail"
            wrong += results.verdict != "fail" and mutant in MUTANTS
        print(f"\n{len(files)} right decoders, {caught} of {len(MUTANTS) + len(UNSEEN)} faulty ones found")
    return int(wrong > 0)


if __name__ == "__main__":
    sys.exit(main())
