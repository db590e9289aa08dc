"""The published sources that a methods paragraph can cite (details from memory where check values name no page)."""

from __future__ import annotations

import re

SOURCES = {
    "average cortex": "Fischl B, Sereno MI, Tootell RBH, Dale AM. High-resolution intersubject averaging and a "
    "coordinate system for the cortical surface. Hum Brain Mapp 1999;8:272-284.",
    "head sizes": "Gordon CC, Blackwell CL, Bradtmiller B, et al. 2012 anthropometric survey of U.S. Army personnel: "
    "methods and summary statistics. NATICK/TR-15/007, 2014.",
    "10-20": "Klem GH, Lüders HO, Jasper HH, Elger C. The ten-twenty electrode system of the International Federation. "
    "Electroencephalogr Clin Neurophysiol Suppl 1999;52:3-6.",
    "10-10": "Acharya JN, Hani AJ, Cheek J, Thirumala P, Tsuchida TN. American Clinical Neurophysiology Society "
    "guideline 2: guidelines for standard electrode position nomenclature. J Clin Neurophysiol 2016;33:308-311.",
    "10-5": "Oostenveld R, Praamstra P. The five percent electrode system for high-resolution EEG and ERP "
    "measurements. Clin Neurophysiol 2001;112:713-719.",
    "conductivity": "Geddes LA, Baker LE. The specific resistance of biological material: a compendium of data for the "
    "biomedical engineer and physiologist. Med Biol Eng 1967;5:271-293.",
    "skull": "Zhang Y, van Drongelen W, He B. Estimation of in vivo brain-to-skull conductivity ratio in humans. "
    "Appl Phys Lett 2006;89:223903.",
    "fluid": "Baumann SB, Wozny DR, Kelly SK, Meno FM. The electrical conductivity of human cerebrospinal fluid at "
    "body temperature. IEEE Trans Biomed Eng 1997;44:220-223.",
    "boundary potential": "Geselowitz DB. On bioelectric potentials in an inhomogeneous volume conductor. Biophys J "
    "1967;7:1-11.",
    "boundary field": "Geselowitz DB. On the magnetic field generated outside an inhomogeneous volume conductor by "
    "internal current sources. IEEE Trans Magn 1970;6:346-347.",
    "isolated": "Hämäläinen MS, Sarvas J. Realistic conductivity geometry model of the human head for interpretation "
    "of neuromagnetic data. IEEE Trans Biomed Eng 1989;36:165-171.",
    "galerkin": "Stenroos M, Sarvas J. Bioelectromagnetic forward problem: isolated source approach revis(it)ed. Phys "
    "Med Biol 2012;57:3517-3535.",
    "one sphere": "Brody DA, Terry FH, Ideker RE. Eccentric dipole in a spherical medium: generalized expression for "
    "surface potentials. IEEE Trans Biomed Eng 1973;20:141-143.",
    "layered sphere": "de Munck JC, Peters MJ. A fast method to compute the potential in the multisphere model. IEEE "
    "Trans Biomed Eng 1993;40:1166-1174.",
    "sphere field": "Sarvas J. Basic mathematical and electromagnetic concepts of the biomagnetic inverse problem. "
    "Phys Med Biol 1987;32:11-22.",
    "density": "Murakami S, Okada Y. Invariance in current dipole moment density across brain structures and species: "
    "physiological constraint for neuroimaging. NeuroImage 2015;111:49-58.",
    "fit": "Harville DA. Maximum likelihood approaches to variance component estimation and to related problems. J Am "
    "Stat Assoc 1977;72:320-338.",
    "information": "Kemppainen PK, Ilmoniemi RJ. Channel capacity of multichannel magnetometers. In: Williamson SJ et "
    "al. (eds). Advances in Biomagnetism. New York: Plenum, 1989:635-638.",
    "error bound": "Mosher JC, Spencer ME, Leahy RM, Lewis PS. Error bounds for EEG and MEG dipole source "
    "localization. Electroencephalogr Clin Neurophysiol 1993;86:303-321.",
    "design": "Pukelsheim F. Optimal Design of Experiments. New York: Wiley, 1993.",
    "exchange": "Fedorov VV. Theory of Optimal Experiments. New York: Academic Press, 1972.",
    "rank": "Nikolov A. Randomized rounding for the largest simplex problem. Proc 47th ACM Symposium on Theory of "
    "Computing, 2015.",
    "branch": "Land AH, Doig AG. An automatic method of solving discrete programming problems. Econometrica "
    "1960;28:497-520.",
}


_OPEN, _CLOSE = "\x02", "\x03"  # no name in a text has control characters, see plain.one_line


def cite(*keys: str) -> str:
    """A mark that `numbered` turns into a citation of these sources. Raises KeyError for an unknown one."""
    for key in keys:
        if key not in SOURCES:
            raise KeyError(key)
    return _OPEN + "|".join(keys) + _CLOSE


def numbered(text: str) -> tuple[str, list[str]]:
    """The text with its citations as numbers in the order of their coming, such as "[1, 4]", and the references."""
    cited: list[str] = []

    def number(mark: re.Match) -> str:
        keys = mark[1].split("|")
        cited.extend(key for key in keys if key not in cited)
        return "[" + ", ".join(str(place) for place in sorted(cited.index(key) + 1 for key in keys)) + "]"

    plain = re.sub(f"{_OPEN}([^{_CLOSE}]*){_CLOSE}", number, text)
    return plain, [f"[{place}] {SOURCES[key]}" for place, key in enumerate(cited, start=1)]
