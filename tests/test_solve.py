"""The front door: public names, choice of method, and what the second opinion may say."""

import importlib
import subprocess
import sys
from dataclasses import replace

import numpy as np
import pytest

import eigen1d
from eigen1d import CheckError, InputError, Profile, Units, solve
from eigen1d.levels import Budget

HEAVY = ("numba", "scipy", "matplotlib")
DOOR = importlib.import_module("eigen1d.solve")


@pytest.fixture(scope="module")
def well():
    """A 10 nm well of 0.3 eV: three bound levels."""
    return Profile.from_rows([0, 5, 5, 15, 15, 20], [0.3, 0.3, 0, 0, 0.3, 0.3], mass=0.067)


class Second:
    """A second opinion with a known fault: energies off by `shift`, the levels `lost` unseen."""

    def __init__(self, shift=0.0, error=1e-9, lost=()):
        self.shift, self.error, self.lost = shift, error, lost

    def find(self, profile, request):
        found = importlib.import_module("eigen1d.shooting").find(profile, request)
        seen = ~np.isin(found.n, self.lost)
        return replace(
            found,
            n=found.n[seen],
            energy=found.energy[seen] + self.shift,
            bracket=found.bracket[seen],
            method="finite-difference",
            budget=Budget(numeric=np.full(seen.sum(), self.error)),
        )

    def estimates(self, profile, first, last):
        energy = solve(profile).energy[first:last] + self.shift
        return energy, np.full(last - first, self.error)


@pytest.fixture
def second(monkeypatch):
    """Put a faulty solver in the place of the finite differences."""

    def install(**fault):
        module = DOOR._module
        instead = {"finite-difference": Second(**fault)}
        monkeypatch.setattr(DOOR, "_module", lambda name: instead.get(name) or module(name))

    return install


def test_public_names_are_these():
    """Other people's scripts import them; a name leaves or joins only on purpose."""
    assert sorted(eigen1d.__all__) == [
        "CheckError", "Ensemble", "InputError", "Levels", "Profile", "TableError", "Units",
        "closed_forms", "read_profile", "solve", "solve_many", "square_well",
    ]  # fmt: skip
    for name in eigen1d.__all__:
        assert getattr(eigen1d, name).__name__.removeprefix("eigen1d.") == name
    assert set(eigen1d.__all__) < set(dir(eigen1d))
    with pytest.raises(AttributeError, match="no attribute 'solv'"):
        eigen1d.solv  # noqa: B018


@pytest.mark.parametrize(
    "imports",
    ["import eigen1d.solve", "import eigen1d.cli", "from eigen1d.solve import solve"],
)
def test_solve_is_the_function_whoever_imports_the_module_first(imports):
    """The module of the same name must not take the function's place in the package."""
    code = f"{imports}\nimport eigen1d\nassert eigen1d.solve.__name__ == 'solve', eigen1d.solve"
    subprocess.run([sys.executable, "-c", code], check=True)


@pytest.mark.parametrize("name", ["closed_forms", "square_well"])
def test_known_levels_are_reached_from_the_package(name):
    """In a fresh process, where no test has imported the module yet."""
    code = f"import eigen1d\nassert eigen1d.{name}.__name__ == 'eigen1d.{name}'"
    subprocess.run([sys.executable, "-c", code], check=True)


@pytest.mark.parametrize(
    "code",
    ["import eigen1d", "from eigen1d.cli import main; main(['--help'])"],
)
def test_a_light_start_loads_nothing_heavy(code):
    """Help must answer at once; numba alone takes longer than a person waits gladly."""
    code += f"\nimport sys; print([m for m in {HEAVY + ('numpy',)} if m in sys.modules])"
    run = subprocess.run([sys.executable, "-c", code], check=True, capture_output=True, text=True)
    assert run.stdout.splitlines()[-1] == "[]"


def test_versions_agree():
    """The package and its metadata must name one version."""
    import pathlib
    import tomllib

    project = pathlib.Path(__file__).parent.parent / "pyproject.toml"
    assert tomllib.loads(project.read_text())["project"]["version"] == eigen1d.__version__


@pytest.mark.parametrize(
    ("keywords", "message"),
    [
        (
            {"method": "guessing"},
            "unknown method 'guessing'; write one of: shooting, finite-difference",
        ),
        (
            {"count": 2, "window": (0, 1)},
            "give count or window, not both: a window returns all levels in it",
        ),
        ({"count": 0}, "count must be a whole number from 1; found 0"),
        ({"count": 2.0}, "count must be a whole number from 1; found 2.0"),
        (
            {"window": (1, 0)},
            "window must ascend: its first energy lies below its second; found 1.0, 0.0",
        ),
        ({"window": (0, np.inf)}, "both ends of the window must be finite; found 0.0, inf"),
        ({"window": (np.nan, 1)}, "both ends of the window must be finite; found nan, 1.0"),
    ],
)
def test_wrong_calls_say_what_to_write(well, keywords, message):
    """From Python the text is the one that the command line prints."""
    with pytest.raises(InputError) as caught:
        solve(well, **keywords)
    assert str(caught.value) == message


def test_something_else_than_a_profile_is_refused():
    """The first mistake of a newcomer is to pass a path; the message says what makes a profile."""
    with pytest.raises(InputError, match="levels are those of a Profile; found 'well.csv'"):
        solve("well.csv")


def test_default_is_every_bound_level(well):
    """A 10 nm well of 0.3 eV and mass 0.067: z0 = 3.64, so ceil(2 z0 / pi) = 3 levels.

    Common practice, no source.
    """
    levels = solve(well)
    assert list(levels.n) == [0, 1, 2] and levels.complete
    assert levels.budget.method is None
    assert len(solve(well, count=2)) == 2
    assert len(solve(well, count=9)) == 3
    assert list(solve(well, window=(0.1, 0.3)).n) == [1, 2]


def test_nothing_bound_is_an_answer():
    """A barrier binds nothing; scripts that loop over profiles must not stop there."""
    barrier = Profile.from_layers([5.0, 5.0, 5.0], [0.0, 0.3, 0.0])
    levels = solve(barrier)
    assert len(levels) == 0 and levels.complete


@pytest.mark.parametrize("method", ["shooting", "finite-difference"])
def test_cross_check_fills_the_method_term(well, method):
    """The difference of two independent methods is a term of its own, and never above the error."""
    levels = solve(well, method=method, cross_check=True)
    assert levels.method == method
    assert levels.budget.method.shape == (3,)
    assert (levels.budget.method < 1e-6).all() and (levels.budget.method > 0).any()
    other = solve(well, method=({"shooting", "finite-difference"} - {method}).pop())
    assert np.array_equal(levels.budget.method, abs(levels.energy - other.energy))


@pytest.mark.parametrize("method", ["shooting", "finite-difference"])
@pytest.mark.parametrize("interpolation", ["linear", "smooth"])
def test_noise_is_what_moving_each_row_does(method, interpolation):
    """Independent rows: the squares of what each alone moves add up, whichever method solves.

    Propagation of uncertainty, common practice, no source. The moves are central differences, so
    they are off by third order in sigma: 1e-3 of 1e-3 squared, and by the error of the method.
    """
    x, V = [0, 4, 4, 9, 13, 13, 17], np.array([0.3, 0.3, 0.02, 0.0, 0.05, 0.25, 0.25])
    sigma = 1e-4 * np.array([9, 1, 4, 7, 3, 2, 5])

    def solved(V, **keywords):
        rows = {"mass": 0.067, "interpolation": interpolation, **keywords}
        return solve(Profile.from_rows(x, V, **rows), method=method)

    levels = solved(V, sigma_V=sigma)
    moved = [(solved(V + step).energy - solved(V - step).energy) / 2 for step in np.diag(sigma)]
    assert len(levels) == 2
    assert levels.budget.noise == pytest.approx(np.linalg.norm(moved, axis=0), rel=1e-4)
    assert levels.budget.total == pytest.approx(levels.budget.noise)  # 1e-12 of it is rounding
    assert solved(V).budget.noise is None


def test_noise_without_levels_or_rows(well):
    """Nothing bound has no noise to tell; layers have no sigma_V, so the term does not apply."""
    flat = Profile.from_rows([0, 5], [0.1, 0.1], sigma_V=0.01)
    assert solve(flat).budget.noise.shape == (0,)
    assert solve(well).budget.noise is None
    assert solve(Profile.from_layers([5, 5, 5], [0.3, 0, 0.3])).budget.noise is None


def test_noise_does_not_loosen_the_cross_check(second):
    """Both methods solve the same rows, so an error of the rows excuses no difference."""
    second(shift=2e-9, error=1e-9)
    noisy = Profile.from_rows([0, 5, 5, 15, 15, 20], [0.3, 0.3, 0, 0, 0.3, 0.3], sigma_V=0.01)
    with pytest.raises(CheckError):
        solve(noisy, cross_check=True)


def test_agreement_within_the_error_passes(well, second):
    """A difference that the second method announces is no contradiction."""
    second(shift=0.9e-9, error=1e-9)
    levels = solve(well, cross_check=True)
    assert levels.budget.method == pytest.approx([0.9e-9] * 3, rel=1e-6)
    assert (levels.budget.total >= levels.budget.method).all()


def test_disagreement_shows_both_numbers(well, second):
    """A number that two methods do not share must not be used, and the user must see why."""
    second(shift=2e-9, error=1e-9)
    with pytest.raises(CheckError) as caught:
        solve(well, cross_check=True)
    energy = solve(well).energy[0]
    assert str(caught.value).splitlines()[:2] == [
        f"level n = 0: shooting finds {energy:.16g} eV, finite-difference {energy + 2e-9:.16g} eV",
        "  They are 2e-09 eV apart; bracket and error estimate together allow 1e-09 eV.",
    ]
    assert "use neither" in str(caught.value)


def test_not_a_number_is_a_disagreement(well, second):
    """NaN compares false with everything; that must not read as agreement."""
    second(shift=np.nan)
    with pytest.raises(CheckError, match="finite-difference nan eV"):
        solve(well, cross_check=True)


def test_a_level_that_only_one_method_finds_is_a_disagreement(well, second):
    """A missed level is the worst fault there is, whichever method misses it."""
    second(lost=[1])
    with pytest.raises(CheckError, match="level n = 1: shooting finds .* eV, .* no such level"):
        solve(well, cross_check=True)
    with pytest.raises(CheckError, match="level n = 1: shooting finds .* eV, .* no such level"):
        solve(well, method="finite-difference", cross_check=True)


def test_a_level_nearer_to_the_continuum_than_the_error_may_be_unseen(well, second):
    """Finite differences cannot tell on which side of the edge such a level lies."""
    bound_by = 0.3 - solve(well).energy[2]
    second(lost=[2], error=1.01 * bound_by)
    assert list(solve(well, cross_check=True).n) == [0, 1, 2]
    second(lost=[2], error=0.99 * bound_by)
    with pytest.raises(CheckError, match="level n = 2"):
        solve(well, cross_check=True)


def test_a_level_at_an_end_of_the_window_may_be_unseen(well, second):
    """What holds for the continuum's edge holds for an edge that the user drew."""
    energy = solve(well).energy
    second(lost=[1], error=1e-6)
    window = (energy[1] - 1e-7, 0.3)
    assert list(solve(well, window=window, cross_check=True).n) == [1, 2]
    with pytest.raises(CheckError, match="level n = 1"):
        solve(well, window=(energy[1] - 1e-5, 0.3), cross_check=True)


def test_two_walls_give_the_lowest_ten():
    """Levels never end there; E_n = pi^2 (n+1)^2 / (2 L^2) for L = 1 (common practice)."""
    box = Profile.from_layers(
        [1.0], [0.0], left="wall", right="wall", units=Units("bohr", "hartree")
    )
    expected = np.pi**2 / 2 * np.arange(1, 11) ** 2
    assert solve(box).energy == pytest.approx(expected, rel=1e-14)


def test_lists_without_end_are_refused():
    """A slip of the finger must not fill the memory for an hour."""
    box = Profile.from_layers([10.0], [0.0], left="wall", right="wall")
    with pytest.raises(InputError, match="count must be at most 100,000; found 100,001"):
        solve(box, count=100_001)
    with pytest.raises(InputError, match="levels lie in the window; ask for at most 100,000"):
        solve(box, window=(0, 1e9))
    with pytest.raises(InputError, match=r"far too many levels lie below 1e\+300; lower the"):
        solve(box, window=(0, 1e300))
    assert len(solve(box, window=(1e6, 1.001e6))) == 8  # n from 16307 on: by the closed form


def test_profiles_of_endless_lengths_are_refused():
    """Metres taken for nanometres, or electronvolts for kelvin, must not fill the memory."""
    with pytest.raises(InputError, match=r"over a million wavelengths .* Is the unit right\?"):
        solve(Profile.from_rows([0, 1e9, 2e9], [0.3, 0, 0.3]))
    assert len(solve(Profile.from_rows([0, 5, 10], [-1e6, -1e6 - 1, -1e6]))) > 0  # V has no zero
    with pytest.raises(InputError, match=r"levels are bound; ask for at most 100,000 of them"):
        solve(Profile.from_layers([20, 1e6, 20], [0.3, 0, 0.3]))


@pytest.mark.parametrize("method", ["shooting", "finite-difference"])
@pytest.mark.parametrize("height", [1.0, 3.0])
def test_an_edge_below_all_cells_binds_nothing(method, height):
    """In a step table the last row is the edge alone: V falls there, and nothing is bound."""
    slope = Profile.from_rows([0, 1, 2], [height, 1, 0], interpolation="step", left="wall")
    assert slope.open_edge < slope.V_min
    levels = solve(slope, method=method)
    assert len(levels) == 0 and levels.complete
