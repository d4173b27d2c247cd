"""Statistics of the box and of all objects together, recomputed with numpy."""

import labels
import numpy as np
import support

NU, ETA = 0.019, 0.007


def check_coefficients():
    """Dissipation integrals and Kolmogorov lengths (Kolmogorov 1941: (nu^3 / epsilon)^(1/4)) from numpy's own gradients."""
    for snapshot in ("mhd_0001", "hydro_0001"):
        path = support.DEMO / f"{snapshot}.h5"
        flow = labels.Flow(path, (2 * np.pi,) * 3)
        magnetic = flow.b is not None
        epsilon = 2 * NU * flow.strain2.mean() + (ETA * (flow.j**2).sum(0).mean() if magnetic else 0.0)
        length = (NU**3 / epsilon) ** 0.25
        options = ["--lengths", "2pi", "--viscosity", NU] + (["--resistivity", ETA] if magnetic else [])
        folder = support.run(path, *options, "--family", "v: vorticity > 2.5 rms")
        # Single precision of the snapshot's derivatives.
        support.close(support.results(folder)["snapshots"][0]["kolmogorov_length"], length, 1e-6, f"{snapshot} kolmogorov_length")
        table = support.rows(folder)
        scaled = [name for name in table[0] if name.endswith("_eta")]
        assert len(table) > 5 and len(scaled) >= 6, f"{len(table)} rows, columns {scaled}"
        measured = 0
        totals = {"viscous": 2 * NU * flow.strain2.sum(), "ohmic": ETA * (flow.j**2).sum() if magnetic else None}
        for row in table:
            tag = f"{snapshot} {row['id']}"
            for name in scaled:
                plain = row[name.removesuffix("_eta")]
                assert (row[name] == "") == (plain == ""), f"{tag} {name}: {row[name]!r} beside {plain!r}"
                if plain:
                    support.close(float(row[name]), float(plain) / length, 1e-6, f"{tag} {name}")
                    measured += 1
            for kind, total in totals.items():
                share, integral = row[f"{kind}_share"], row[f"dissipation_{kind}"]
                if total is None:
                    assert share == integral == "", f"{tag}: {kind} without a field"
                    continue
                # Shares themselves are checked beside the labels.
                support.close(float(integral), float(share) * total * flow.h.prod(), 1e-5, f"{tag} dissipation_{kind}")
        assert measured >= 5 * len(scaled), f"{snapshot}: {measured} lengths compared"
        if magnetic:
            folder = support.run(path, "--lengths", "2pi", "--viscosity", NU, "--surfaces", "none")
            assert support.results(folder)["snapshots"][0]["kolmogorov_length"] is None, "total dissipation without resistivity"
            assert all(row[name] == "" for row in support.rows(folder) for name in scaled)


def compare_alignment(told, flow, cells, tolerance, tag):
    """A block `alignment` of run.json against numpy over the cells."""
    vectors = flow.vectors(cells)
    for name, p, q in (("lamb_sin2", "u", "w"), ("lorentz_sin2", "j", "b")):
        if p in vectors:
            support.close(told[name], labels.squared_sine(vectors, p, q), tolerance, f"{tag} {name}")
        else:
            assert told[name] is None, f"{tag} {name}: {told[name]}"
    for name, p, q in labels.COSINES:
        if p not in vectors or q not in vectors:
            assert name not in told, f"{tag}: {name} should be missing"
            continue
        c = told[name]
        assert c["cells"] == len(cells), f"{tag} {name}: {c['cells']} cells, wanted {len(cells)}"
        wanted = labels.cosine(vectors[p], vectors[q])
        labels.compare_cosine(c["mean"], c["abs_mean"], c["aligned"], np.array(c["histogram"]), wanted, tolerance, f"{tag} {name}")


def check_alignment_inside_and_outside():
    """Of listed objects together, of all other cells (those of dropped objects too) and of the box; numpy, scipy.ndimage.label."""
    random, lengths = labels.random_snapshot("f8")
    cases = (
        (random, lengths, 1e-10),
        (support.DEMO / "mhd_0002.h5", (2 * np.pi,) * 3, 1e-5),
        (support.DEMO / "hydro_0001.h5", (2 * np.pi,) * 3, 1e-5),
    )
    for path, lengths, tolerance in cases:
        flow = labels.Flow(path, lengths)
        specs, masks = [], {}
        for indicator, fraction in (("vorticity", 0.03), ("lorentz", 0.05), ("strain", 0.2)):
            if indicator == "lorentz" and flow.b is None:
                continue
            values = flow.indicator(indicator)
            rounding = 1e-12 if tolerance < 1e-8 else 10 * np.finfo(np.float32).eps
            level = labels.level_in_a_gap(values, np.quantile(values, 1 - fraction), rounding)
            specs.append(f"{indicator}: {indicator} > {level!r}")
            masks[indicator] = values > level
        options = ["--lengths", ",".join(repr(float(v)) for v in lengths), "--min-cells", 27, "--surfaces", "none"]
        told = support.results(support.run(path, *options, *support.families(specs)))["snapshots"][0]
        compare_alignment(told["alignment"], flow, np.arange(flow.n.prod()), tolerance, f"{path.name} box")
        for family in told["families"]:
            mask, tag = masks[family["family"]], f"{path.name} {family['definition']}"
            listed = np.concatenate([c for c in labels.objects(mask, 26) if len(c) >= 27])
            assert 0 < family["dropped_cells"] == mask.sum() - len(listed), f"{tag}: {family['dropped_cells']} cells dropped"
            rest = np.setdiff1d(np.arange(mask.size), listed)
            compare_alignment(family["alignment"]["objects"], flow, listed, tolerance, f"{tag}, objects")
            compare_alignment(family["alignment"]["outside"], flow, rest, tolerance, f"{tag}, outside")
