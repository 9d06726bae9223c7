"""Names a model card may hold, by kind and level, and the older names that mean the same.

Source: what ngspice-39 itself lists (``devhelp``), read. Where it has two names for one parameter
the one textbooks use is kept.
"""

from __future__ import annotations

from collections.abc import Mapping

_JUNCTION_COMMON = "tnom level kf af"

_BIPOLAR = (
    "npn pnp subs is ibe ibc bf nf vaf ikf ise ne br nr var ikr isc nc rb irb rbm re rc cje vje "
    "mje tf xtf vtf itf ptf cjc vjc mjc xcjc tr cjs vjs mjs xtb eg xti fc iss ns rco vo gamma qco "
    "tlev tlevc tbf1 tbf2 tbr1 tbr2 tikf1 tikf2 tikr1 tikr2 tirb1 tirb2 tnc1 tnc2 tne1 tne2 tnf1 "
    "tnf2 tnr1 tnr2 trb1 trb2 trc1 trc2 tre1 tre2 trm1 trm2 tvaf1 tvaf2 tvar1 tvar2 ctc cte cts "
    "tvjc tvje tvjs titf1 titf2 ttf1 ttf2 ttr1 ttr2 tmje1 tmje2 tmjc1 tmjc2 tmjs1 tmjs2 tns1 tns2 "
    "nkf tis1 tis2 tise1 tise2 tisc1 tisc2 tiss1 tiss2 quasimod vg cn d vbe_max vbc_max vce_max "
    "pd_max ic_max ib_max te_max rth0"
)
_DIODE = (
    "is jsw rs trs trs2 n ns tt ttt1 ttt2 cjo vj m tm1 tm2 cjp php mjsw ikf ikr nbv area pj tlev "
    "tlevc eg xti cta ctp tpb tphp jtun jtunsw ntun xtitun keg fc fcs bv ibv tcv isr nr fv_max "
    "bv_max id_max te_max pd_max rth0 cth0 lm lp wm wp xom xoi xm xp"
)
_JUNCTION_FET = (
    "njf pjf vto beta lambda rd rs cgs cgd pb is fc b tcv vtotc bex betatce xti eg nlev gdsnoi"
)
_MOS = (
    "nmos pmos vto kp gamma phi lambda rd rs cbd cbs is pb cgso cgdo cgbo rsh cj mj cjsw mjsw js "
    "tox ld uo fc nsub tpg nss"
)
_MOS_2 = f"{_MOS} delta uexp ucrit vmax xj neff nfs"
_MOS_3 = f"{_MOS} xl wd xw delvto vmax xj nfs xd alpha eta delta input_delta theta kappa"
_VERTICAL_MOS = (
    "vto kp phi lambda theta rd rs rg vdmosn vdmosp vdmos rq vq mtriode tcvth mu texp0 texp1 trd1 "
    "trd2 trg1 trg2 trs1 trs2 trb1 trb2 subshift ksubthres tksubthres1 tksubthres2 bv ibv nbv rds "
    "rb n tt eg xti is vj cjo m fc cgdmin cgdmax a cgs rthjc rthca cthj vgs_max vgd_max vds_max "
    "vgsr_max vgdr_max pd_max id_max idr_max te_max rth_ext derating"
)
_RESISTOR = "rsh narrow short tc1 tc2 tce defw l r bv_max lf wf ef"
_CAPACITOR = "cap cj cjsw defw defl narrow short del tc1 tc2 di thick bv_max"
_INDUCTOR = "ind tc1 tc2 csect length nt mu l"


def _known(text: str) -> frozenset[str]:
    return frozenset(f"{text} {_JUNCTION_COMMON}".split())


_KNOWN: Mapping[str, frozenset[str]] = {
    "npn": _known(_BIPOLAR),
    "pnp": _known(_BIPOLAR),
    "d": _known(_DIODE),
    "njf": _known(_JUNCTION_FET),
    "pjf": _known(_JUNCTION_FET),
    "nmos": _known(_MOS),
    "pmos": _known(_MOS),
    "vdmosn": _known(_VERTICAL_MOS),
    "vdmosp": _known(_VERTICAL_MOS),
    "r": _known(_RESISTOR),
    "res": _known(_RESISTOR),
    "c": _known(_CAPACITOR),
    "cap": _known(_CAPACITOR),
    "l": _known(_INDUCTOR),
    "ind": _known(_INDUCTOR),
}
_KNOWN_BY_LEVEL: Mapping[float, frozenset[str]] = {2.0: _known(_MOS_2), 3.0: _known(_MOS_3)}

_BIPOLAR_ALIASES = {
    "tref": "tnom", "va": "vaf", "ik": "ikf", "c2": "ise", "vb": "var", "c4": "isc", "pe": "vje",
    "me": "mje", "pc": "vjc", "mc": "mjc", "csub": "cjs", "ccs": "cjs", "ps": "vjs", "ms": "mjs",
    "trb": "trb1", "trc": "trc1", "tre": "tre1", "nk": "nkf",
}  # fmt: skip
_DIODE_ALIASES = {
    "js": "is", "tref": "tnom", "trs1": "trs", "cj0": "cjo", "cj": "cjo", "pb": "vj", "mj": "m",
    "cjsw": "cjp", "ik": "ikf", "ctc": "cta", "tvj": "tpb", "ib": "ibv",
}  # fmt: skip
_MOS_ALIASES = {"vt0": "vto", "u0": "uo", "delvt0": "delvto"}
_VERTICAL_MOS_ALIASES = {"vth0": "vto", "vt0": "vto", "vtotc": "tcvth", "bex": "mu", "cj0": "cjo"}
_RESISTOR_ALIASES = {
    "dw": "narrow", "dlr": "short", "tc1r": "tc1", "tc2r": "tc2", "w": "defw", "res": "r",
}  # fmt: skip
_CAPACITOR_ALIASES = {"cox": "cj", "capsw": "cjsw", "w": "defw", "l": "defl", "c": "cap"}
_ALIASES: Mapping[str, Mapping[str, str]] = {
    "npn": _BIPOLAR_ALIASES,
    "pnp": _BIPOLAR_ALIASES,
    "d": _DIODE_ALIASES,
    "njf": {"vt0": "vto"},
    "pjf": {"vt0": "vto"},
    "nmos": _MOS_ALIASES,
    "pmos": _MOS_ALIASES,
    "vdmosn": _VERTICAL_MOS_ALIASES,
    "vdmosp": _VERTICAL_MOS_ALIASES,
    "r": _RESISTOR_ALIASES,
    "res": _RESISTOR_ALIASES,
    "c": _CAPACITOR_ALIASES,
    "cap": _CAPACITOR_ALIASES,
}

# Ratings and maker's data that exporters and vendors put into cards; they change nothing.
_RATINGS = frozenset(
    (
        *("mfg", "type", "vceo", "vcbo", "vebo", "icrating", "icmax", "ic_max", "pd", "ptot"),
        *("vds", "vdsmax", "ron", "qg", "vpk", "iave", "irms", "vrrm", "idmax", "rthja"),
        *("t_measured", "t_abs", "t_rel_global", "t_rel_local", "status", "nchan", "pchan"),
    )
)  # fmt: skip

INSTANCE_PARAMETERS: Mapping[str, frozenset[str]] = {
    "d": frozenset(("area", "pj", "w", "l", "m", "temp", "dtemp", "lm", "lp", "wm", "wp")),
    "q": frozenset(("area", "areab", "areac", "m", "temp", "dtemp")),
    "j": frozenset(("area", "m", "temp", "dtemp")),
    "m": frozenset(("m", "l", "w", "ad", "as", "pd", "ps", "nrd", "nrs", "temp", "dtemp")),
}
INITIAL_CONDITIONS = frozenset(
    ("ic", "off", "icvbe", "icvce", "icvds", "icvgs", "icvbs", "thermal", "ic-vds", "ic-vgs")
)
"""Instance parameters that matter to a transient analysis alone."""


def canonical(kind: str, name: str) -> str:
    """The name under which the parameter is kept."""
    return _ALIASES.get(kind, {}).get(name, name)


def is_known(kind: str, level: float, name: str) -> bool:
    """Whether ngspice's model of this kind and level has the parameter."""
    if kind in ("nmos", "pmos") and level in _KNOWN_BY_LEVEL:
        return name in _KNOWN_BY_LEVEL[level]
    known = _KNOWN.get(kind)
    return known is None or name in known


def is_rating(name: str) -> bool:
    """Whether a parameter, in lower case, is a rating or maker's data that no equation uses."""
    return name in _RATINGS


def known_names(kind: str) -> frozenset[str]:
    """The parameters of ngspice's models of this kind, of any level; empty for an unknown kind."""
    return _KNOWN.get(kind, frozenset())
