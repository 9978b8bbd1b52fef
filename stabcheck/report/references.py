"""Who is to be cited for what: BibTeX entries, and the entries of each step that a run can take.

From memory: titles, last pages and DOIs were typed without the papers at hand and are to be compared with the
publisher's record before they go to print. Authors, journals, volumes and first pages are those named in the modules
that use them.
"""

from collections.abc import Iterable
from dataclasses import dataclass

from stabcheck.errors import StabcheckError


@dataclass(frozen=True, slots=True)
class Entry:
    """One BibTeX entry."""

    kind: str
    author: str
    title: str
    year: int
    rest: str

    def as_bibtex(self, key: str) -> str:
        """Write the entry."""
        fields = [("author", self.author), ("title", f"{{{self.title}}}"), ("year", str(self.year))]
        fields += [_field(part) for part in self.rest.split("; ")]
        lines = ",\n".join(f"  {name:<9} = {{{value}}}" for name, value in fields)
        return f"@{self.kind}{{{key},\n{lines}\n}}\n"


def _field(part: str) -> tuple[str, str]:
    name, _, value = part.partition(" ")
    return name, value


def _article(author: str, title: str, year: int, journal: str, volume: int, pages: str, doi: str) -> Entry:
    return Entry("article", author, title, year, f"journal {journal}; volume {volume}; pages {pages}; doi {doi}")


AJ, APJ, MNRAS, ICARUS = "The Astronomical Journal", "The Astrophysical Journal", "MNRAS", "Icarus"

ENTRIES: dict[str, Entry] = {
    "rein2012": _article(
        "Rein, Hanno and Liu, Shang-Fei",
        "REBOUND: an open-source multi-purpose N-body code for collisional dynamics",
        2012,
        "Astronomy and Astrophysics",
        537,
        "A128",
        "10.1051/0004-6361/201118085",
    ),
    "reintamayo2015": _article(
        "Rein, Hanno and Tamayo, Daniel",
        "WHFast: a fast and unbiased implementation of a symplectic Wisdom-Holman integrator for long-term "
        "gravitational simulations",
        2015,
        MNRAS,
        452,
        "376--388",
        "10.1093/mnras/stv1257",
    ),
    "wisdomholman1991": _article(
        "Wisdom, Jack and Holman, Matthew",
        "Symplectic maps for the n-body problem",
        1991,
        AJ,
        102,
        "1528--1538",
        "10.1086/115978",
    ),
    "reinspiegel2015": _article(
        "Rein, Hanno and Spiegel, David S.",
        "IAS15: a fast, adaptive, high-order integrator for gravitational dynamics, accurate to machine precision "
        "over a billion orbits",
        2015,
        MNRAS,
        446,
        "1424--1437",
        "10.1093/mnras/stu2164",
    ),
    "lu2024": _article(
        "Lu, Tiger and Hernandez, David M. and Rein, Hanno",
        "TRACE: a code for time-reversible astrophysical close encounters",
        2024,
        MNRAS,
        533,
        "3708--3723",
        "10.1093/mnras/stae1982",
    ),
    "cincotta2000": _article(
        "Cincotta, P. M. and Sim{\\'o}, C.",
        "Simple tools to study global dynamics in non-axisymmetric galactic potentials - I",
        2000,
        "Astronomy and Astrophysics Supplement Series",
        147,
        "205--228",
        "10.1051/aas:2000108",
    ),
    "reintamayo2016": _article(
        "Rein, Hanno and Tamayo, Daniel",
        "Second-order variational equations for N-body simulations",
        2016,
        MNRAS,
        459,
        "2275--2285",
        "10.1093/mnras/stw644",
    ),
    "wisdom2015": _article(
        "Wisdom, Jack", "Resolving the pericenter", 2015, AJ, 150, "127", "10.1088/0004-6256/150/4/127"
    ),
    "hernandez2022": _article(
        "Hernandez, David M. and Zeebe, Richard E. and Hadden, Sam",
        "Stepsize errors in the N-body problem: discerning Mercury's true possible long-term orbits",
        2022,
        MNRAS,
        510,
        "4302--4307",
        "10.1093/mnras/stab3664",
    ),
    "laskar1990": _article(
        "Laskar, Jacques",
        "The chaotic motion of the solar system: a numerical estimate of the size of the chaotic zones",
        1990,
        ICARUS,
        88,
        "266--291",
        "10.1016/0019-1035(90)90084-M",
    ),
    "laskar1993": _article(
        "Laskar, Jacques",
        "Frequency analysis for multi-dimensional systems. Global dynamics and diffusion",
        1993,
        "Physica D",
        67,
        "257--281",
        "10.1016/0167-2789(93)90210-R",
    ),
    "robutel2001": _article(
        "Robutel, P. and Laskar, J.",
        "Frequency map and global dynamics in the Solar System I: short period dynamics of massless particles",
        2001,
        ICARUS,
        152,
        "4--28",
        "10.1006/icar.2000.6576",
    ),
    "murray1999": Entry(
        "book",
        "Murray, Carl D. and Dermott, Stanley F.",
        "Solar System Dynamics",
        1999,
        "publisher Cambridge University Press; address Cambridge",
    ),
    "nobili1986": Entry(
        "inproceedings",
        "Nobili, A. and Roxburgh, I. W.",
        "Simulation of general relativistic corrections in long term numerical integrations of planetary orbits",
        1986,
        "booktitle Relativity in Celestial Mechanics and Astrometry (IAU Symposium 114); pages 105--111",
    ),
    "wilson1927": _article(
        "Wilson, Edwin B.",
        "Probable inference, the law of succession, and statistical inference",
        1927,
        "Journal of the American Statistical Association",
        22,
        "209--212",
        "10.1080/01621459.1927.10502953",
    ),
    "kish1965": Entry("book", "Kish, Leslie", "Survey Sampling", 1965, "publisher Wiley; address New York"),
    "lissauer2001": _article(
        "Lissauer, Jack J. and Rivera, Eugenio J.",
        "Stability analysis of the planetary system orbiting upsilon Andromedae. II. Simulations using new Lick "
        "Observatory fits",
        2001,
        APJ,
        554,
        "1141--1150",
        "10.1086/321426",
    ),
    "lee2003": _article(
        "Lee, Man Hoi and Peale, S. J.",
        "Secular evolution of hierarchical planetary systems",
        2003,
        APJ,
        592,
        "1201--1216",
        "10.1086/375857",
    ),
    "chen2017": _article(
        "Chen, Jingjing and Kipping, David",
        "Probabilistic forecasting of the masses and radii of other worlds",
        2017,
        APJ,
        834,
        "17",
        "10.3847/1538-4357/834/1/17",
    ),
    "harris2020": _article(
        "Harris, Charles R. and Millman, K. Jarrod and {van der Walt}, St{\\'e}fan J. and others",
        "Array programming with NumPy",
        2020,
        "Nature",
        585,
        "357--362",
        "10.1038/s41586-020-2649-2",
    ),
    "virtanen2020": _article(
        "Virtanen, Pauli and Gommers, Ralf and Oliphant, Travis E. and others",
        "SciPy 1.0: fundamental algorithms for scientific computing in Python",
        2020,
        "Nature Methods",
        17,
        "261--272",
        "10.1038/s41592-019-0686-2",
    ),
    "hunter2007": _article(
        "Hunter, John D.",
        "Matplotlib: a 2D graphics environment",
        2007,
        "Computing in Science and Engineering",
        9,
        "90--95",
        "10.1109/MCSE.2007.55",
    ),
    "lam2015": Entry(
        "inproceedings",
        "Lam, Siu Kwan and Pitrou, Antoine and Seibert, Stanley",
        "Numba: a LLVM-based Python JIT compiler",
        2015,
        "booktitle Proceedings of the Second Workshop on the LLVM Compiler Infrastructure in HPC; pages 1--6; "
        "doi 10.1145/2833157.2833162",
    ),
}

STEPS: dict[str, tuple[str, ...]] = {
    "engine rebound": ("rein2012",),
    "method whfast": ("wisdomholman1991", "reintamayo2015"),
    "method trace": ("lu2024",),
    "method ias15": ("reinspiegel2015",),
    "step rule": ("wisdom2015", "hernandez2022"),
    "relativity": ("nobili1986",),
    "secular cycles": ("murray1999",),
    "megno": ("cincotta2000", "reintamayo2016"),
    "frequency drift": ("laskar1990", "laskar1993", "robutel2001"),
    "jacobi elements of a velocity fit": ("lissauer2001", "lee2003"),
    "radii chen-kipping-2017": ("chen2017",),
    "wilson limits": ("wilson1927",),
    "effective number": ("kish1965",),
    "package numpy": ("harris2020",),
    "package scipy": ("virtanen2020",),
    "package matplotlib": ("hunter2007",),
    "package numba": ("lam2015",),
}
"""What a run can do, and the keys that go with it."""


def keys_of(steps: Iterable[str]) -> tuple[str, ...]:
    """List the keys of the steps a run took, in their order, each once.

    Raises
    ------
    StabcheckError
        If a step has no reference: the methods text would then hide where it comes from.
    """
    keys: dict[str, None] = {}
    for step in steps:
        if step not in STEPS:
            raise StabcheckError(
                f"the step {step!r} has no reference",
                where="methods text",
                why="every step of a run is to be cited",
                do="report this; add the step to stabcheck/report/references.py",
            )
        keys |= dict.fromkeys(STEPS[step])
    return tuple(keys)


def bibtex_of(keys: Iterable[str]) -> str:
    """Write BibTeX entries, in the order of the keys."""
    return "\n".join(ENTRIES[key].as_bibtex(key) for key in keys)
