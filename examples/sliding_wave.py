"""The library in a page: build a pump, prove its integer, ask for its margins, and see what breaks it.

Run it with ``python examples/sliding_wave.py``.
"""

from dataclasses import replace

import scatterpump as sp

WIRE = sp.Lead(hopping=2.0)


def main() -> None:
    chain = sp.ModulatedChain(
        name="sliding superlattice",
        sites=90,
        fermi_level=-1.2,
        onsite=[sp.Wave(amplitude=1.5, period=3)],
        probe=WIRE,
        drain=WIRE,
    )
    pump = chain.pump()

    winding = sp.certify(pump)
    print(f"{winding.number} charge a cycle, proven with {winding.evaluations} evaluations")
    for crossing in winding.crossings:
        print(f"  a level passes the Fermi level at phi = {crossing.phase:.3f}, half-width {crossing.width:.2g} rad")

    gap = sp.bulk_gap(pump)
    print(f"Fermi levels between {gap.lower_edge.upper:.3f} and {gap.upper_edge.lower:.3f} carry the same")

    print("behind a contact a thousand times weaker:")
    weak = replace(chain, probe=replace(WIRE, contact=1e-3)).pump()
    print(
        f"  {sp.certify(weak).number} charge a cycle, at a resonance of half-width "
        f"{sp.certify(weak).crossings[0].width:.1g}"
    )

    print("with disorder as strong as the gap:")
    for seed in range(4):
        dirty = replace(chain, disorder=sp.Disorder(onsite=2 * gap.upper, seed=seed))
        verdict = sp.judge(dirty.pump())
        print(f"  sample {seed}: {'trustworthy' if verdict.trustworthy else 'not to be trusted'}")


if __name__ == "__main__":
    main()
