"""Make the values of the built-in example. They are invented.

Nobody measured them. The scenario is our own: amide nitrogens of a bromodomain in
microcrystals, deuterated and back-exchanged, spinning at 60 kHz in a 600 MHz magnet;
R1rho at twelve spin-lock fields that can be used and one, 58 kHz, too close to the
rotary-resonance condition at the spinning rate. The coordinates are those of the entry
4CUP of the Protein Data Bank, which has nothing to do with these values. The sample is
numbered from its first residue, so the numbers differ from the entry's by 1855.

What was planted (numbers of the entry):

* ``LOOP``: ten residues of one loop share the correlation time 7 microseconds;
* ``ACROSS``: four and four residues on two molecules that touch only through the
  crystal share 18 microseconds;
* ``HINGE``: six residues move at 0.8 microseconds, outside the window of the method;
* ``PATCH``: seven residues each with a time of its own, from 4 to 30 microseconds;
* everything else moves at 10 ns, which such profiles cannot see; prolines have no
  amide proton and seven more residues were not measured.

``python examples/make_example.py`` writes the table anew, byte for byte the same.
"""

from pathlib import Path

import gemmi
import numpy as np

FOLDER = Path(__file__).parent
FIRST_NUMBER = 1856
LOOP = (1890, 1891, 1893, 1894, 1895, 1896, 1897, 1898, 1900, 1901)
ACROSS = (1916, 1919, 1920, 1922, 1955, 1956, 1959, 1960)
HINGE = (1944, 1945, 1946, 1947, 1948, 1950)
PATCH = (1925, 1926, 1927, 1928, 1929, 1930, 1931)
NOT_MEASURED = (1856, 1857, 1884, 1903, 1921, 1951, 1970)
FIELDS_KILOHERTZ = np.array([5, 8, 11, 14, 17, 20, 23, 26, 36, 41, 46, 50], dtype=float)
RESONANT_KILOHERTZ = 58.0
SPINNING_HERTZ = 60e3
PROTON_FREQUENCY_HERTZ = 600e6
SEED = 20260101

# CODATA 2018, rounded as printed; 1H and 15N gyromagnetic ratios in rad/s/T.
HBAR, GAMMA_H, GAMMA_N = 1.054571817e-34, 2.6752218744e8, -2.71261804e7
BOND_METRE, ANISOTROPY = 1.02e-10, -172e-6


def rate_per_amplitude(field_kilohertz, time_second):
    """Return R1rho in s^-1 for A = 1, where A is 1 less the squared order parameter.

    Second-order rate under magic-angle spinning (Kurbanov, Zinkevich and Krushelnitsky,
    J. Chem. Phys. 135, 184104 (2011), from memory).
    """
    coupling = 1e-7 * HBAR * GAMMA_H * GAMMA_N / BOND_METRE**3
    larmor = GAMMA_N * 2 * np.pi * PROTON_FREQUENCY_HERTZ / GAMMA_H
    anisotropy = larmor * ANISOTROPY / np.sqrt(3)
    lock = 2 * np.pi * 1e3 * np.asarray(field_kilohertz)
    spin = 2 * np.pi * SPINNING_HERTZ

    def density(omega):
        return 0.4 * time_second / (1 + (omega * time_second) ** 2)

    mixed = density(lock - 2 * spin) + 2 * density(lock - spin)
    mixed = (mixed + 2 * density(lock + spin) + density(lock + 2 * spin)) / 6
    return (coupling**2 / 2 + 2 * anisotropy**2 / 3) * mixed


def draw_block(rng, times, low, high):
    """Return values and errors at the usable fields, one row a residue."""
    n_sites = len(times)
    amplitude, baseline = (
        rng.uniform(low, high, n_sites),
        rng.uniform(1.5, 3.5, n_sites),
    )
    kernel = np.array([rate_per_amplitude(FIELDS_KILOHERTZ, time) for time in times])
    truth = baseline[:, None] + amplitude[:, None] * kernel
    error = 0.03 * truth + 0.15
    return truth + error * rng.standard_normal(truth.shape), error


def make_rows():
    """Return the rows of the table: number, name, field, value, error."""
    structure = gemmi.read_structure(str(FOLDER / "4cup.cif.gz"))
    structure.setup_entities()
    names = {r.seqid.num: r.name for r in structure[0][0].get_polymer()}
    moving = (*LOOP, *ACROSS, *HINGE, *PATCH)
    measured = [n for n in names if names[n] != "PRO" and n not in NOT_MEASURED]
    quiet = [n for n in measured if n not in moving]
    rng = np.random.default_rng(SEED)
    blocks = (
        (LOOP, np.full(len(LOOP), 7e-6), 0.004, 0.012),
        (ACROSS, np.full(len(ACROSS), 1.8e-5), 0.002, 0.006),
        (HINGE, np.full(len(HINGE), 8e-7), 0.004, 0.010),
        (PATCH, np.geomspace(4e-6, 3e-5, len(PATCH)), 0.003, 0.008),
        (quiet, np.full(len(quiet), 1e-8), 0.05, 0.15),
    )
    found = {}
    for numbers, times, low, high in blocks:
        values, errors = draw_block(rng, times, low, high)
        found |= dict(zip(numbers, zip(values, errors, strict=True), strict=True))
    rows = []
    for number in measured:
        values, errors = found[number]
        # Near the resonance coherent decay adds to what motion causes.
        coherent = values[-1] + rng.uniform(6.0, 10.0)
        points = [*zip(FIELDS_KILOHERTZ, values, errors, strict=True)]
        points.append((RESONANT_KILOHERTZ, coherent, 0.03 * coherent + 0.15))
        rows += [(number - FIRST_NUMBER + 1, names[number], *point) for point in points]
    return rows


def main():
    """Write the table beside this script."""
    lines = ["auth_seq_id,auth_comp_id,x [kHz],R1rho [s-1],error"]
    lines += [f"{n},{name},{x:g},{y:.4f},{s:.4f}" for n, name, x, y, s in make_rows()]
    path = FOLDER / "invented_values.csv"
    path.write_text("\n".join(lines) + "\n", encoding="utf-8", newline="\n")
    print(f"{path.name}: {len(lines) - 1} points, invented")


if __name__ == "__main__":
    main()
