"""Published facts about control volumes that no check is held to, and why."""

from __future__ import annotations

LEFT_OUT = [
    "Identities without reference data (closure, gauge pressure, shift of the moment point, rotation, change of "
    "observer, a uniform stream through a surface that moves): tested at random in `test_property_*.py`, "
    "`test_geometry_exact.py` and `test_moving.py`; there is no figure to print.",
    "Friction factors of ducts, f·Re (Shah and London 1978), and the mean speed of annular flow: fluxmesh lays the "
    "shape of a profile, not its size for a given pressure drop. That wall friction is what the pressure gives is "
    "checked on a pipe.",
    "Drag of a sphere by Oseen: his flow is no exact solution, so a balance over it does not close.",
    "Stagnation point and width of the half body: coordinates of a streamline, which no balance yields. The force on "
    "its source is checked.",
    "Prandtl and Meyer's expansion: in a fan the flow varies in the angle; the compressible sink and vortex of "
    "`test_compressible.py` is such a smooth exact flow.",
    "Contraction of a jet from a slot, pi/(pi + 2), and Kirchhoff's drag of a plate, 2 pi/(pi + 4): they need the "
    "free streamlines, not a balance. Borda's mouthpiece, which momentum alone decides, is checked.",
    "ASME B31.1, appendix II, and B31.3, 301.5: the same balance as the relief valve with load factors of their own, "
    "and paragraphs that are quoted from memory.",
    "Rules of thumb for hoses, Q sqrt(p)/20 and the published .0505 Q sqrt(p) of fog nozzles: rounded on purpose; the "
    "theory behind them is checked.",
    "DFG benchmark 3D-1Q, cylinder in a square channel at Re 20: its figures are known from memory only, and would "
    "need a three-dimensional flow computation.",
    "Lid-driven cavity (Ghia 1982; Botella and Peyret 1998): speeds along lines, not forces; the force on the lid "
    "does not converge, as the stress at its corners is infinite.",
    "ASME V&V 20, u_val: fluxmesh puts a reported load beside its own and its doubt, but forms no validation "
    "uncertainty.",
    "JCGM 100, H.1, effective degrees of freedom and the interval of 99 %, and JCGM 101, 9.5: fluxmesh takes "
    "uncertainties as half widths of 95 % without degrees of freedom.",
    "ISO 6976 (heating value of gas) and ISO 5167 (metering): no force and no flow to compare with.",
    "Sharing a load between bolts or supports, and nodal loads of a structure: fluxmesh ends at the wrench at the "
    "anchor.",
    "AWWA M45, area of a thrust block, and dynamic load factors: design rules on top of the force.",
    "Names of CGNS (SIDS), BCType and units: no figures; `test_cgns.py` holds the reader to them.",
    "Dunavant's rules of other degrees than four: not used.",
    "Libraries iapws, fluids, uncertainties, pytransform3d and modepy: not among the packages the tests need; their "
    "figures are those of the sources above.",
    "Files .post.gz and .dato.gz that are really packed: the library behind both reads plain text under these names, "
    "and the file is refused with a message; the rows above hold such plain files.",
]
