"""The shipped tables: each solves by both methods, is described, and is what its README says."""

import json
from pathlib import Path

import numpy as np
import pytest

from eigen1d import cli, read_profile, solve

FOLDER = Path(__file__).parent.parent / "potentials"
TABLES = sorted(FOLDER.glob("*.csv"))


def test_readme_describes_each_table_and_no_other():
    """A table whose origin nobody knows is worth nothing."""
    text = (FOLDER / "README.md").read_text()
    names = {path.name for path in TABLES}
    assert len(names) >= 10
    described = {line[2:].split("**")[0] for line in text.splitlines() if line.startswith("**")}
    listed = {line[3:].split("`")[0] for line in text.splitlines() if line.startswith("| `")}
    assert described == names and listed == names


@pytest.mark.parametrize("path", TABLES, ids=lambda path: path.stem)
def test_shipped_table_passes_the_cross_check(path, tmp_path, capsys):
    """The first thing a newcomer runs; it must work with every default."""
    out = tmp_path / "levels.json"
    assert cli.main(["levels", str(path), "--json", str(out)]) == 0
    printed = capsys.readouterr()
    assert printed.err == ""
    found = json.loads(out.read_text())
    assert found["complete"] and found["profile"]["title"] in printed.out
    for level in found["levels"]:
        assert level["bracket"][0] <= level["energy"] <= level["bracket"][1]
        assert level["budget"]["method"] is not None
    binds = path.stem != "bare_barrier"
    assert bool(found["levels"]) == binds


def test_export_has_five_thousand_rows():
    """The size that a device simulator writes."""
    assert read_profile(FOLDER / "simulation_export.csv").row_count == 5000


def test_stack_has_two_bands_of_twenty():
    """Twenty coupled wells split each level of one well into twenty (common practice)."""
    energy = solve(read_profile(FOLDER / "stack_20.csv")).energy
    assert energy.size == 40
    assert np.argmax(np.diff(energy)) == 19
    assert energy[19] - energy[0] < 0.0014  # as the README says


def test_noise_is_what_sigma_says():
    """Against the smoothed profile, noise over sigma has the size of 1."""
    rows = read_profile(FOLDER / "measured_profile.csv").rows
    assert rows.V.size == 61 and set(np.round(rows.sigma_V, 6)) == {0.0025, 0.004}
    # Second differences cancel what is smooth: their variance is 6 sigma^2 for white noise. Only on
    # the plateaus, where the profile itself has none.
    flat = np.r_[1:11, 50:60]
    second = (rows.V[flat - 1] - 2 * rows.V[flat] + rows.V[flat + 1]) / np.sqrt(6)
    assert 0.5 < np.sqrt(np.mean((second / rows.sigma_V[flat]) ** 2)) < 1.7


def test_hydrogen_follows_morse():
    """omega_e (v + 1/2) - omega_e x_e (v + 1/2)^2, P. M. Morse, Phys. Rev. 34 (1929) 57.

    What is left is the table: a spline through points 0.02 Angstrom apart misses V by some h^4, and
    beyond 10 Angstrom V is held.
    """
    energy = solve(read_profile(FOLDER / "hydrogen_molecule.csv")).energy
    v = np.arange(18) + 0.5
    assert energy.size == 18  # v + 1/2 < omega_e / (2 omega_e x_e) = 18.14
    assert energy == pytest.approx(4401.21 * v - 121.33 * v**2, abs=0.02)


def test_dimensionless_has_its_closed_form():
    """-l (l + 1) sech^2 x with l = 3 has -9, -4, -1, G. Poschl, E. Teller, Z. Phys. 83 (1933) 143.

    The spline through points 0.1 apart leaves 1e-5.
    """
    energy = solve(read_profile(FOLDER / "dimensionless.csv")).energy
    assert energy == pytest.approx([-9, -4, -1], abs=2e-5)


def test_lattice_levels_come_in_bands_of_five():
    """Five sites, five levels a band; the band gap is far wider than the lower band."""
    energy = solve(read_profile(FOLDER / "optical_lattice.csv")).energy
    assert energy.size == 10
    assert energy[5] - energy[4] > 20 * (energy[4] - energy[0])
