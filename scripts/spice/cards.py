"""The invented devices and the circuits of testdata/spice, as netlist text.

Every device says how it stands in a netlist between drain, gate and source
(`lines`), what its comment lines are (`keys`), and which numbers of it go into
INDEX.csv (vto, kp, theta, rs). DEVICES and CIRCUITS are what methods may be
chosen on; HELD_BACK and HELD_CIRCUITS are for judging only.
"""

UT = "25.8649m"  # V, kT/q at 27 C, as written into the behavioural sources


class Device:
    """One card of level 1 or 3. vto, kp, theta, lam as ngspice takes them; rs in ohm outside the card."""

    held = False

    def __init__(self, name, level, vto, kp, lam=0.0, theta=0.0, rs=0.0, channel="n", mode="enhancement", nfs="2e11"):
        self.name, self.level, self.vto, self.kp = name, level, vto, kp
        self.lam, self.theta, self.rs, self.nfs = lam, theta, rs, nfs
        self.channel, self.mode = channel, mode
        self.family = f"level {level}"

    @property
    def sign(self):
        return -1 if self.channel == "p" else 1

    def card(self):
        kind = "PMOS" if self.channel == "p" else "NMOS"
        text = f"{kind} LEVEL={self.level} VTO={self.vto:g} KP={self.kp:g}"
        if self.level == 1:
            return text + f" LAMBDA={self.lam:g}"
        return text + f" THETA={self.theta:g} NFS={self.nfs} TOX=50n KAPPA=0"

    def lines(self, source):
        return [f".model part {self.card()}", f"m1 d g {source} {source} part W=100u L=100u"]

    def keys(self):
        keys = [
            ("card", self.card() + " W=100u L=100u (invented)"),
            ("level", self.level),
            ("vto", f"{self.vto:g}"),
            ("kp", f"{self.kp:g}"),
            ("lambda", f"{self.lam:g}"),
            ("theta", f"{self.theta:g}"),
            ("rs", f"{self.rs:g}"),
        ]
        if self.held and self.level == 3:
            keys.append(("nfs", self.nfs))
        return keys


class Held(Device):
    """A card of level 1 or 3 that is held back."""

    held = True


class Bsim3(Device):
    """A wide long-channel card of the BSIM3v3 model (level 8), m of them side by side."""

    held = True

    def __init__(self, name, vth0, m, length, rs=0.0, **card):
        super().__init__(name, 8, vth0, None, theta=None, rs=rs)
        self.family, self.m, self.length, self.parts = "bsim3", m, length, card

    def card(self):
        more = " ".join(f"{k}={v}" for k, v in self.parts.items())
        return (f"NMOS LEVEL=8 VERSION=3.3.0 TNOM=27 VTH0={self.vto:g} {more} K2=0 K3=0 NLX=0 DVT0=0 CDSC=0 CIT=0"
                f" ETA0=0 ETAB=0 PDIBLC1=0 PDIBLC2=0")

    def where(self):
        return f"W=10m L={self.length} M={self.m}"

    def lines(self, source):
        # a netlist line longer than a screen is broken with +
        words = self.card().split()
        head, rest = words[:6], words[6:]
        return [".model part " + " ".join(head) + "\n+ " + " ".join(rest), f"m1 d g {source} {source} part {self.where()}"]

    def keys(self):
        return [("card", f"{self.card()} {self.where()} (invented)"), ("level", 8), ("vto", f"{self.vto:g}"),
                ("rs", f"{self.rs:g}")] + [(k.lower(), v) for k, v in self.parts.items()]


class Root(Device):
    """A smooth behavioural device: overdrive rounded by a root, an exponential foot, velocity saturation.

    With v = V_GS - vt:
        o   = (v + sqrt(v^2 + 4 delta^2)) / 2
        s   = o vc / (o + vc)                    V_DS at which the current saturates
        e   = V_DS / (1 + (V_DS/s)^4)^(1/4)
        I_D = b / (1 + exp(-v/(n kT/q))) (o - e/2) e (1 + lam V_DS) / ((1 + e/vc) sqrt(1 + (o/vm)^2))
    """

    held = True

    def __init__(self, name, vt, b, delta, n, vc, vm, lam, rs=0.0):
        super().__init__(name, 0, vt, None, theta=None, lam=lam, rs=rs)
        self.family, self.form = "smooth", "root"
        self.p = {"vt": vt, "b": b, "delta": delta, "n": n, "vc": vc, "vm": vm, "lam": lam}

    def card(self):
        return f"smooth {self.form}: " + " ".join(f"{k}={v:g}" for k, v in self.p.items())

    def lines(self, source):
        return [
            f"* {self.card()}; nodes v, o, w, e hold its inner quantities in volts",
            ".param " + " ".join(f"{k}={v:g}" for k, v in self.p.items()) + f" ut={UT}",
            f"bv v 0 V = V(g,{source}) - {{vt}}",
            "bo o 0 V = 0.5*(V(v) + sqrt(V(v)*V(v) + 4*{delta}*{delta}))",
            "bw w 0 V = V(o)*{vc}/(V(o) + {vc})",
            f"be e 0 V = V(d,{source})/sqrt(sqrt(1 + (V(d,{source})/V(w))*(V(d,{source})/V(w))*(V(d,{source})/V(w))*(V(d,{source})/V(w))))",
            f"b1 d {source} I = {{b}}/(1 + exp(-V(v)/({{n}}*{{ut}})))*(V(o) - V(e)/2)*V(e)*(1 + {{lam}}*V(d,{source}))"
            "/((1 + V(e)/{vc})*sqrt(1 + (V(o)/{vm})*(V(o)/{vm})))",
        ]

    def keys(self):
        return ([("card", self.card() + " (invented)"), ("level", 0), ("vto", f"{self.vto:g}"), ("rs", f"{self.rs:g}"),
                 ("form", self.form)] + [("p_" + k, f"{v:g}") for k, v in self.p.items()])


class Charge(Root):
    """A smooth behavioural device by inversion charge, after the unified charge control model.

    The charges at source and drain, in units of their value where drift equals
    diffusion, are the roots that the simulator finds of
        q_s - 1 + ln q_s = (V_GS - vt) / (n kT/q)
        q_d - 1 + ln q_d = (V_GS - vt) / (n kT/q) - V_DS / (kT/q)
    and, with D = q_s - q_d,
        I_D = b/2 n (kT/q)^2 D (q_s + q_d + 2) (1 + lam V_DS)
              / (sqrt(1 + (zeta D)^2) (1 + (eta q_s)^(3/2)))
    A. I. A. Cunha, M. C. Schneider, C. Galup-Montoro, IEEE J. Solid-State Circuits 33 (1998) 1510
    (charge and current; from memory); the two denominators are invented.
    """

    def __init__(self, name, vt, b, n, zeta, eta, lam, rs=0.0):
        Device.__init__(self, name, 0, vt, None, theta=None, lam=lam, rs=rs)
        self.family, self.form = "smooth", "charge"
        self.p = {"vt": vt, "b": b, "n": n, "zeta": zeta, "eta": eta, "lam": lam}

    def lines(self, source):
        return [
            f"* {self.card()}; nodes ys, yd hold ln of the charges",
            ".param " + " ".join(f"{k}={v:g}" for k, v in self.p.items()) + f" ut={UT}",
            f"bs ys 0 I = exp(V(ys)) - 1 + V(ys) - (V(g,{source}) - {{vt}})/({{n}}*{{ut}})",
            f"bd yd 0 I = exp(V(yd)) - 1 + V(yd) - (V(g,{source}) - {{vt}})/({{n}}*{{ut}}) + V(d,{source})/{{ut}}",
            "bq q 0 V = exp(V(ys)) - exp(V(yd))",
            f"b1 d {source} I = {{b}}/2*{{n}}*{{ut}}*{{ut}}*V(q)*(exp(V(ys)) + exp(V(yd)) + 2)*(1 + {{lam}}*V(d,{source}))"
            "/(sqrt(1 + {zeta}*{zeta}*V(q)*V(q))*(1 + {eta}*exp(V(ys))*sqrt({eta}*exp(V(ys)))))",
        ]


class Circuit:
    """How the drain is fed, for an n-channel part; a p-channel part gets every voltage negated.

    start and stop are the ends of the gate sweep measured from VTO.
    """

    def __init__(self, tag, kind, start, stop, rl=None, vdd=None, vds=None):
        self.tag, self.kind, self.start, self.stop = tag, kind, start, stop
        self.rl, self.vdd, self.vds = rl, vdd, vds


DEVICES = [
    Device("l1", 1, 3.0, 2.0, lam=0.01),
    Device("l3", 3, 3.0, 2.0, theta=0.1),
    Device("l3r", 3, 3.0, 2.0, theta=0.1, rs=0.1),
    Device("l3p", 3, -3.0, 2.0, theta=0.1, channel="p"),
    Device("l3d", 3, -2.0, 2.0, theta=0.1, mode="depletion"),
    Device("l3low", 3, 0.7, 4.0, theta=0.1),
]
CIRCUITS = [
    Circuit("load10", "load", -1.5, 3.0, rl=10, vdd=12),
    Circuit("load1k", "load", -1.0, 1.0, rl=1000, vdd=12),
    Circuit("diode", "diode", -1.5, 1.5),
    Circuit("fixed0v1", "fixed", -1.5, 3.0, vds=0.1),
    Circuit("fixed10", "fixed", -1.5, 1.5, vds=10),
    Circuit("fixed28", "fixed", -1.5, 1.5, vds=28),
]

_LOAD4R7 = Circuit("load4r7", "load", -1.2, 4.0, rl=4.7, vdd=5)
_LOAD22 = Circuit("load22", "load", -1.2, 4.0, rl=22, vdd=24)
_LOAD100 = Circuit("load100", "load", -1.2, 4.0, rl=100, vdd=28)
_DIODE = Circuit("diode", "diode", -1.2, 4.0)
_FIXED10 = Circuit("fixed10", "fixed", -1.2, 4.0, vds=10)
_FIXED0V1 = Circuit("fixed0v1", "fixed", -1.2, 5.0, vds=0.1)

_LONG = {"K1": "0.8", "UA": "1e-9", "UB": "1e-18", "UC": "0", "DELTA": "0.01"}

# Held-back devices, each with the circuits it is swept in.
HELD_BACK = [
    (Held("h1a", 1, 1.8, 0.6, lam=0.02), [_LOAD100, _DIODE, _FIXED10, _FIXED0V1]),
    (Held("h1b", 1, 4.1, 5.0, lam=0.005, rs=0.05), [_LOAD4R7, _LOAD22, _DIODE, _FIXED0V1]),
    (Held("h3a", 3, 1.8, 0.6, theta=0.03, rs=0.3, nfs="1e11"), [_LOAD22, _DIODE, _FIXED10, _FIXED0V1]),
    (Held("h3b", 3, 4.1, 5.0, theta=0.25, nfs="3.5e11"), [_LOAD100, _DIODE, _FIXED10, _FIXED0V1]),
    (Held("h3c", 3, 2.2, 12.0, theta=0.25, rs=0.05, nfs="2.5e11"), [_LOAD4R7, _DIODE, _FIXED10, _FIXED0V1]),
    (Held("h3d", 3, 2.2, 12.0, theta=0.03, rs=0.3, nfs="1.5e11"), [_LOAD22, _LOAD100, _FIXED10, _FIXED0V1]),
    (Bsim3("hb1", 3.2, 12, "2u", TOX="50n", NCH="1e16", U0="500", VSAT="8e4", RDSW="0", NFACTOR="1.2", VOFF="-0.1", PCLM="0.2", PSCBE1="1e10", **_LONG),
     [_LOAD22, _DIODE, _FIXED10, _FIXED0V1]),
    (Bsim3("hb2", 1.9, 24, "1.2u", TOX="30n", NCH="2e16", U0="600", VSAT="9e4", RDSW="300", NFACTOR="1.0", VOFF="-0.08", PCLM="0.5", **_LONG),
     [_LOAD4R7, _DIODE, _FIXED10, _FIXED0V1]),
    (Bsim3("hb3", 4.1, 16, "4u", rs=0.05, TOX="80n", NCH="3e15", U0="450", VSAT="1e5", RDSW="0", NFACTOR="1.5", VOFF="-0.12", PCLM="0.1", PSCBE1="1e10", **_LONG),
     [_LOAD100, _DIODE, _FIXED10, _FIXED0V1]),
    (Root("hs1", 2.6, 3.5, 0.03, 1.6, 8, 5, 0.004, rs=0.05), [_LOAD22, _DIODE, _FIXED10, _FIXED0V1]),
    (Charge("hs2", 1.7, 6.0, 1.35, 0.01, 0.004, 0.006), [_LOAD4R7, _DIODE, _FIXED10, _FIXED0V1]),
    (Charge("hs3", 3.9, 1.5, 1.9, 0.004, 0.01, 0.002, rs=0.1), [_LOAD100, _DIODE, _FIXED10, _FIXED0V1]),
]
