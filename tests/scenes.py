"""Flowsheet files for the tests, built from numbers.

Flows are given as plain numbers in `unit` (mol/s unless said otherwise), so a published kmol/h
figure may stand as it is: isothermal stages know no scale.
"""

COLD = "25 degC"
HOT = "120 degC"


def number(value):
    """The shortest text that reads back as the same double, without a numpy wrapper."""
    return repr(float(value))


def flow(value, unit="mol/s"):
    return f'"{number(value)} {unit}"'


def flow_table(flows, unit="mol/s"):
    return "{ " + ", ".join(f"{name} = {flow(value, unit)}" for name, value in flows.items()) + " }"


def constant(K, basis="fraction"):
    """y = K x, or Y = K X with basis "ratio"."""
    tail = ', basis = "ratio"' if basis == "ratio" else ""
    return f'{{ model = "constant", K = {number(K)}{tail} }}'


def constants(names, K, basis="fraction"):
    return {name: constant(value, basis) for name, value in zip(names, K, strict=True)}


def table(coordinates, horizontal, vertical):
    """A table model in mole fractions ("xy") or mole ratios ("XY")."""
    across, up = coordinates
    listed = lambda values: "[" + ", ".join(number(v) for v in values) + "]"  # noqa: E731
    return f'{{ model = "table", {across} = {listed(horizontal)}, {up} = {listed(vertical)} }}'


def equilibrium(name, models):
    return f"[equilibrium.{name}]\n" + "".join(f"{c} = {text}\n" for c, text in models.items())


def components(solutes, stays):
    """`stays` maps each carrier to "gas" or "liquid"."""
    lines = [f'{c} = {{ molar_mass = "{40 + 7 * i} g/mol", stays_in = "{phase}" }}'
             for i, (c, phase) in enumerate(stays.items())]
    lines += [f'{c} = {{ molar_mass = "{60 + 11 * i} g/mol" }}' for i, c in enumerate(solutes)]
    return "[components]\n" + "\n".join(lines) + "\n"


def feed(name, phase, flows, unit="mol/s", temperature=COLD, pressure="1 bar"):
    return (f'[feeds.{name}]\nphase = "{phase}"\ntemperature = "{temperature}"\n'
            f'pressure = "{pressure}"\nflows = {flow_table(flows, unit)}\n')


def loop_table(method=None, tears=None, tolerance=None):
    lines = []
    if method:
        lines.append(f'method = "{method}"')
    if tolerance:
        lines.append(f"tolerance = {tolerance!r}")
    if tears:
        lines.append("tears = [" + ", ".join(f'"{t}"' for t in tears) + "]")
    return "[loop]\n" + "\n".join(lines) + "\n" if lines else ""


def requirement(name, quantity, equals, free, between):
    """`equals` is a plain number, or text with a unit where the quantity has a dimension."""
    low, high = between
    target = f'"{equals}"' if isinstance(equals, str) else number(equals)
    return (f'[requirements.{name}]\nquantity = "{quantity}"\nequals = {target}\n'
            f'free = "{free}"\nbetween = ["{low}", "{high}"]\n')


def column(kind, stages, solutes, gas, liquid, models, unit="mol/s", temperature=COLD,
           pressure="1 bar", stays=None, extra=""):
    """One column: `gas` and `liquid` map components to flows, `models` solutes to model texts.

    Streams: sour and solvent in, cleaned and rich out (an absorber's names serve both kinds).
    """
    stays = {"inert": "gas", "oil": "liquid"} if stays is None else stays
    return "\n".join([
        f'title = "One {kind}"\n',
        feed("sour", "gas", gas, unit, temperature, pressure),
        feed("solvent", "liquid", liquid, unit, temperature, pressure),
        f'[units.column]\nkind = "{kind}"\ngas_in = "sour"\nliquid_in = "solvent"\n'
        f'gas_out = "cleaned"\nliquid_out = "rich"\nstages = {stages}\nequilibrium = "stage"\n',
        equilibrium("stage", models),
        components(solutes, stays),
        extra,
    ])


def loop(stages, cold, hot, solvent, gas, stripping, feed_ratio, stripping_ratio=None, purge=0.0,
         impurity=0.0, unit="mol/s", pressure="1 bar", method=None, tears=None, tolerance=None,
         extra="", order=None):
    """Absorber and stripper closed over one held solvent.

    `cold` and `hot` map the solutes to model texts; `feed_ratio` and `stripping_ratio` map them
    to mole ratios in the gas to be cleaned and in the stripping gas. A non-volatile impurity, if
    fed, joins the rich liquid; a `purge` share of the lean liquid leaves before the make-up.

    Candidate tear streams: rich, (dirty,) hot_rich, lean, (kept,) topped, cool_lean.
    """
    solutes = list(cold)
    stripping_ratio = stripping_ratio or {}
    ordered = order or solutes
    sour = {"inert": gas} | {c: gas * feed_ratio[c] for c in ordered}
    strip_gas = {"steam": stripping} | {c: stripping * stripping_ratio[c]
                                        for c in ordered if c in stripping_ratio}
    n_wash, n_strip = stages
    parts = [
        'title = "Closed absorber and stripper"\n',
        feed("vent", "gas", sour, unit, COLD, pressure),
        feed("steam", "gas", strip_gas, unit, HOT, pressure),
        f'[units.wash]\nkind = "absorber"\ngas_in = "vent"\nliquid_in = "cool_lean"\n'
        f'gas_out = "cleaned"\nliquid_out = "rich"\nstages = {n_wash}\nequilibrium = "cold"\n',
    ]
    to_heater = "rich"
    if impurity:
        to_heater = "dirty"
        parts += [
            feed("dirt", "liquid", {"tar": impurity}, unit, COLD, pressure),
            '[units.join]\nkind = "mixer"\ntakes = ["rich", "dirt"]\ngives = "dirty"\n',
        ]
    parts += [
        f'[units.preheat]\nkind = "heater"\ntakes = "{to_heater}"\ngives = "hot_rich"\n'
        f'temperature = "{HOT}"\n',
        f'[units.strip]\nkind = "stripper"\nliquid_in = "hot_rich"\ngas_in = "steam"\n'
        f'gas_out = "overhead"\nliquid_out = "lean"\nstages = {n_strip}\nequilibrium = "hot"\n',
    ]
    to_make_up = "lean"
    if purge:
        to_make_up = "kept"
        parts.append(
            '[units.divide]\nkind = "splitter"\ntakes = "lean"\ngives = ["bleed", "kept"]\n'
            f"shares = {{ bleed = {number(purge)} }}\n")
    parts += [
        f'[units.top_up]\nkind = "makeup"\ntakes = "{to_make_up}"\ngives = "topped"\n'
        f"hold = {{ oil = {flow(solvent, unit)} }}\n",
        f'[units.trim]\nkind = "cooler"\ntakes = "topped"\ngives = "cool_lean"\n'
        f'temperature = "{COLD}"\n',
        equilibrium("cold", {c: cold[c] for c in ordered}),
        equilibrium("hot", {c: hot[c] for c in ordered}),
        components(ordered, {"inert": "gas", "steam": "gas", "oil": "liquid"}
                   | ({"tar": "liquid"} if impurity else {})),
        loop_table(method, tears, tolerance),
        extra,
    ]
    return "\n".join(parts)


def tear_candidates(purge=0.0, impurity=0.0):
    return (["rich"] + (["dirty"] if impurity else []) + ["hot_rich", "lean"]
            + (["kept"] if purge else []) + ["topped", "cool_lean"])


def write(tmp_path, text, name="sheet.toml"):
    path = tmp_path / name
    path.write_text(text, encoding="utf-8")
    return path


def read(tmp_path, text, name="sheet.toml"):
    import leanloop

    return leanloop.read(write(tmp_path, text, name))


def solve(tmp_path, text, cases=None, name="sheet.toml"):
    sheet = read(tmp_path, text, name)
    return sheet.solve() if cases is None else sheet.solve(cases)
