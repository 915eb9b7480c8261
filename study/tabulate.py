"""Outcomes of a study's tasks to result tables: lists of plain rows, which the catalog keeps and charts and sheet read."""

import math

import numpy as np

from study.bands import curve_rows
from study.drawn import gathered
from study.linear_model import LinearModel, is_nonlinear
from study.measures import KEYS
from study.methods import spread
from study.position_words import position_text
from study.tasks import StudyWork
from study.verdicts import AS_DRAWN, HOLD, VERDICT_BUILDS, Share, looser, open_together, verdict_of
from study.zone_words import zone_text

QUANTILES = {
    "q005": 0.005,
    "q025": 0.025,
    "q05": 0.05,
    "q25": 0.25,
    "q50": 0.5,
    "q75": 0.75,
    "q95": 0.95,
    "q975": 0.975,
    "q995": 0.995,
}
TABLES = ("ranking", "stats", "histogram", "curves", "demand", "worst", "correlations", "failures", "verdicts")
BINS = 40
STILL = {"deg": 1e-7, "mm": 1e-7, "%": 1e-6}  # spread below this is the solver's rounding (rows close to 1e-9 mm)
STILL_RATE = 1e-9
NO_SHARES = ("st", "st_low", "st_high", "s1", "s1_low", "s1_high", "linear_share", "mu_star", "mu_star_low", "mu_star_high")
LINEAR_DRAWS = 4096


def tables(work: StudyWork, outcomes: dict) -> tuple[dict[str, list[dict]], dict]:
    """(result tables, facts of the run) from the outcomes by task number."""
    out = {k: [] for k in TABLES}
    facts = {"builds": 0, "dropped_blocks": 0, "unassembled": 0, "withheld": False, "notes": list(work.warnings)}
    for stage in work.stages:
        _Stage(work, stage, outcomes, out, facts).fill()
    _verdicts(work, outcomes, out, facts)
    curves = next(task for task in work.tasks if task.kind == "curves")
    out["curves"] = _curves(work, curves, outcomes[curves.number])
    facts["builds"] += sum(work.builds(task) for task in work.tasks if task.kind not in ("worst", "verdict"))
    facts["perfect"] = list(work.model.perfect)
    return out, facts


class _Stage:
    """One stage of a study."""

    def __init__(self, work, stage, outcomes, out, facts):
        self.work, self.stage, self.out, self.facts = work, stage, out, facts
        self.study, self.model, self.method = work.study, work.model, work.study.method
        self.measures = self.study.measures
        tasks = [t for t in work.tasks if t.stage == stage]
        effects = outcomes[next(t.number for t in tasks if t.kind == "effects")].values
        self.linear = LinearModel(work, stage, effects)
        self.drawn = gathered(work, [t for t in tasks if t.kind == "draws"], outcomes)
        self.worst = next((outcomes[t.number] for t in tasks if t.kind == "worst"), None)
        self.lots = next((outcomes[t.number] for t in tasks if t.kind == "lots"), None)
        gone = {"alignment.toe", "alignment.camber", "alignment.caster"} if stage == "before" else set()
        self.sources = [i for i, s in enumerate(self.model.sources) if s.name not in gone]

    def fill(self):
        self.result = self._analysed() if self.drawn is not None else None
        self._ranking()
        self._stats()
        if self.drawn is not None and self.stage == "after":
            self._demand()
        if self.worst is not None:
            self._worst()

    # --- sampled methods

    def _analysed(self):
        bad = self.drawn.status > 0
        result = self.work.method.analyse(self.work.problem, self.drawn.values, seed=self.study.seed, unassembled=bad)
        self.facts["unassembled"] += int(bad.sum())
        self.facts["dropped_blocks"] = max(self.facts["dropped_blocks"], int(getattr(result, "dropped_blocks", 0) or 0))
        if getattr(result, "withheld", False):
            self.facts["withheld"] = True
            self.facts["notes"].append(
                f"{self.stage}: {int(bad.sum())} of {len(bad)} builds could not be assembled or aligned, more than 0.5 %: "
                "indices are withheld, the sources of the failures are ranked instead"
            )
            self._failures(result.failures)
        return result

    def _failures(self, failures):
        if failures is None:
            return
        values = failures.st if self.method == "sobol" else failures.source_mu_star
        for g in np.argsort(failures.rank[0]):
            self.out["failures"].append({
                "stage": self.stage, "source": self.model.sources[g].name, "rank": int(failures.rank[0, g]),
                "value": _number(values[0, g]),
            })  # fmt: skip

    # --- rows

    def _is_still(self, i):
        """Whether nothing moves the measure: what spread it has is the rounding of the solver."""
        if self.drawn is not None:
            values = self.drawn.values[i, self.drawn.status == 0]
            values = values[np.isfinite(values)]
            spread_of = float(values.std()) if len(values) else math.nan
        else:
            spread_of = self.linear.rss[i]
        return spread_of < STILL.get(_unit(self.measures[i]), STILL_RATE)

    def _ranking(self):
        still = [self._is_still(i) for i in range(len(self.measures))]
        for i, measure in enumerate(self.measures):
            if still[i]:
                self.facts["notes"].append(f"{self.stage}: nothing moves {measure.name}, so nothing is ranked for it")
            rows = [self._ranking_row(i, measure, g) for g in self.sources]
            for row in rows if still[i] else ():
                row |= dict.fromkeys(NO_SHARES) | {"effect": None, "effect_per_mm": None}
            key = {"sobol": "st", "morris": "mu_star"}.get(self.method, "linear_share")
            if rows and all(row[key] is None for row in rows):
                key = "linear_share"
            rows.sort(key=lambda row, key=key: -(row[key] if row[key] is not None else -1.0))
            for rank, row in enumerate(rows, start=1):
                row["rank"] = rank
            self._ties(i, rows, still[i])
            self.out["ranking"] += rows

    def _ties(self, i, rows, still):
        tied = getattr(self.result, "tied", None)
        number = {s.name: g for g, s in enumerate(self.model.sources)}
        for rank, row in enumerate(rows):
            row["tied"] = bool(rank and not still and tied is not None and not self._held_back(i) and tied[i, number[row["source"]]])

    def _held_back(self, i):
        if self.result is None or self.method == "spread":
            return True
        return bool(self.result.withheld or self.result.withheld_measures[i])

    def _ranking_row(self, i, measure, g):
        source = self.model.sources[g]
        row = {
            "stage": self.stage, "measure_no": i, "measure": measure.name, "unit": _unit(measure), "source": source.name,
            "linear_share": _number(self.linear.shares[i, g]), "verdict": None,
        }  # fmt: skip
        for key in ("st", "s1"):
            for end in ("", "_low", "_high"):
                row[key + end] = self._index(i, g, key + end) if self.method == "sobol" else None
        for name, attribute in (
            ("mu_star", "source_mu_star"),
            ("mu_star_low", "source_low"),
            ("mu_star_high", "source_high"),
        ):
            row[name] = self._index(i, g, attribute) if self.method == "morris" else None
        return row | self._effect(i, measure, source)

    def _index(self, i, g, name):
        return None if self._held_back(i) else _number(getattr(self.result, name)[i, g])

    def _effect(self, i, measure, source):
        """The signed effects of the measure's own hand; an axle measure reads the left hand's, then the right's."""
        axle = self.work.after.solid or KEYS[measure.of].scope == "axle"
        columns = [c for rows in source.columns for c in rows] if axle else list(source.of_hand(measure.side))
        axes = list(source.axes)
        if axle and len(source.columns) == 2:
            axes = [f"left {a}" for a in axes] + [f"right {a}" for a in axes]
        signed = self.linear.signed[i, columns]
        effect = None if is_nonlinear(measure) or not np.isfinite(signed).all() else [float(e) for e in signed]
        size = None if effect is None else math.sqrt(sum(e * e for e in effect))
        return {
            "effect": effect,
            "effect_axes": axes,
            "effect_unit": f"{_unit(measure)} per {source.unit}",
            "effect_per_mm": size,
        }

    def _stats(self):
        m = len(self.measures)
        values, bad = self._independent()
        summary = self._summary(values, bad[0])
        limits = np.array([measure.limits or (-np.inf, np.inf) for measure in self.measures]).reshape(m, 2)
        limited = any(measure.limits for measure in self.measures)
        good = None
        if summary is not None and limited and self.method != "linear":  # a linear model knows no stops and no failures
            good = spread.good_share(values, limits, bad[0] | bad[1])
            each = spread.good_share(values, limits, bad[0])  # a stop that was reached is no fault of a measure inside its limits
        self._facts_of(good, bad)
        for i, measure in enumerate(self.measures):
            row = self._stats_row(i, measure)
            if summary is not None:
                row |= {"mean": _number(summary.mean[i]), "sd": _number(summary.sd[i])}
                row |= {"low": _number(summary.low[i]), "high": _number(summary.high[i])}
                row |= {k: _number(q) for k, q in zip(QUANTILES, summary.quantiles[i], strict=True)}
                row |= {"builds": int(values.shape[1]), "unassembled": int(bad[0].sum())}
                self._histogram(i, values[i])
            if good is not None and measure.limits:
                row |= {
                    "good_share": float(each.measure_share[i]),
                    "good_low": float(each.measure_low[i]),
                    "good_high": float(each.measure_high[i]),
                    "lost_share": float(each.lost[i]),
                }
            self.out["stats"].append(row)
        if summary is not None and self.method == "spread":
            self._correlations(summary)

    def _summary(self, values, bad):
        if self.method == "spread":
            return self.result
        return spread.summary(values, unassembled=bad) if values is not None and values.shape[1] else None

    def _independent(self):
        """Values (M, N) of independent builds and the flags (unassembled, adjuster ran out), each (N,)."""
        if self.drawn is None:
            return self._linear_draws(), (np.zeros(LINEAR_DRAWS, bool), np.zeros(LINEAR_DRAWS, bool))
        values, *bad = self.drawn.independent()
        return values, bad

    def _linear_draws(self):
        return self.linear.draws(LINEAR_DRAWS) if self.method == "linear" else None

    def _facts_of(self, good, bad):
        if self.stage == self.work.stages[-1]:
            self.facts |= {
                "good_share": None if good is None else good.share, "good_low": None if good is None else good.low,
                "good_high": None if good is None else good.high,
            }  # fmt: skip
            if good is not None and self.study.cars:
                chances = self._all_cars(good)
                self.facts |= dict(zip(("all_cars", "all_cars_low", "all_cars_high"), chances, strict=True))

    def _all_cars(self, good):
        """Chance that all cars of the study are inside, with its interval: share^N, or that of lots where jigs are shared."""
        if self.lots is None:
            return [spread.all_cars(share, self.study.cars) for share in (good.share, good.low, good.high)]
        m, a = len(self.measures), (self.lots.values.shape[0] - len(self.measures)) // 2
        limits = np.array([measure.limits or (-np.inf, np.inf) for measure in self.measures])
        values = self.lots.values[:m]
        inside = ((values >= limits[:, :1]) & (values <= limits[:, 1:])) | ~np.isfinite(limits).any(axis=1)[:, None]
        sound = (self.lots.status == 0) & ~(self.lots.values[m + a :] > 0).any(axis=0)
        lots = Share.of((inside.all(axis=0) & sound).reshape(-1, self.study.cars).all(axis=1))
        return [lots.share, lots.low, lots.high]

    def _stats_row(self, i, measure):
        none = dict.fromkeys(
            ("mean", "sd", "low", "high", *QUANTILES, "good_share", "good_low", "good_high", "lost_share", "builds", "unassembled")
        )
        low, high = measure.limits or (-math.inf, math.inf)
        nominal, one_slope = self.linear.nominal_of(i), not is_nonlinear(measure)
        worst = [nominal + self.linear.worst_low[i], nominal + self.linear.worst_high[i]] if one_slope else [math.nan] * 2
        return {
            "stage": self.stage, "measure_no": i, "measure": measure.name, "of": measure.of, "unit": _unit(measure),
            "side": "axle" if KEYS[measure.of].scope_on(self.work.after.solid) == "axle" else measure.side,
            "position": position_text(measure), "nominal": _number(nominal), **none,
            "limit_low": _number(low), "limit_high": _number(high),
            "rss": _number(self.linear.rss[i]),
            "worst_low": _number(worst[0]),
            "worst_high": _number(worst[1]),
        }  # fmt: skip

    def _histogram(self, i, values):
        values = values[np.isfinite(values)]
        if not len(values):
            return
        least = 1e-9 * (1.0 + abs(values.mean()))
        ends = (values.min(), max(values.max(), values.min() + least))
        counts, edges = np.histogram(values, bins=BINS, range=ends)
        for count, left, right in zip(counts, edges[:-1], edges[1:], strict=True):
            self.out["histogram"].append(
                {"stage": self.stage, "measure_no": i, "left": float(left), "right": float(right), "count": int(count)}
            )

    def _correlations(self, summary):
        for a, b in zip(*np.triu_indices(len(self.measures), 1), strict=True):
            self.out["correlations"].append({
                "stage": self.stage, "measure_a": self.measures[a].name, "measure_b": self.measures[b].name,
                "r": _number(summary.correlations[a, b]),
            })  # fmt: skip

    def _demand(self):
        """What independent builds ask of the adjusters; a screening walk is no sample of builds and has none."""
        hands, rows = self.work.after.hands, self.drawn.rows
        names = [(name, hand.bench, k) for name, hand in hands.items() for k in range(len(hand.bench.by))]
        for k, (hand, bench, number) in enumerate(names if self.drawn.has_independent else ()):
            settings = self.drawn.settings[k, rows]
            sound = settings[np.isfinite(settings) & (self.drawn.status[rows] == 0)]
            if len(sound):
                step = bench.step[number]
                sound = step * np.round(sound / step) if step else sound
                self.out["demand"].append({
                    "adjuster": bench.targets[number] + (f" ({hand})" if len(hands) > 1 else ""), "by": bench.by[number],
                    "unit": "mm", "low": float(sound.min()), "high": float(sound.max()), **_quantiles(sound, QUANTILES),
                    "ran_out_share": float(self.drawn.ran_out[k, rows].mean()),
                })  # fmt: skip

    def _worst(self):
        rows = self.worst.values[:-2].reshape(len(self.measures), 2, -1)
        self.facts["builds"] += int(self.worst.values[-2, 0])
        lost = int(self.worst.values[-1, 0])
        if lost:
            self.facts["unassembled"] += lost
            self.facts["notes"].append(f"{self.stage}: {lost} builds of the search could not be assembled or aligned; worse ones may lie beyond")
        for i, k in np.ndindex(len(self.measures), 2):
            for source in self.model.sources:
                for hand, columns in zip(source.hands, source.columns, strict=True):
                    for axis, column in zip(source.axes, columns, strict=True):
                        self.out["worst"].append({
                            "stage": self.stage, "measure_no": i, "direction": ("low", "high")[k], "value": _number(rows[i, k, 0]),
                            "source": source.name, "axis": axis if hand == "both" else f"{hand} {axis}",
                            "error": _number(rows[i, k, 1 + column]),
                        })  # fmt: skip


def _verdicts(work, outcomes, out, facts):
    """One row a source with its counterfactual share, the verdict in the ranking, and the set that passes together."""
    tasks = [task for task in work.tasks if task.kind == "verdict"]
    if not tasks:
        return
    wanted, sources = work.study.wanted_share, work.model.sources
    flags = np.concatenate([outcomes[task.number].values[0] for task in tasks]).reshape(-1, VERDICT_BUILDS)
    facts["builds"] += int(np.isfinite(flags).sum())
    shares = {AS_DRAWN + i: Share.of(row[np.isfinite(row)]) for i, row in enumerate(flags)}
    drawn = shares.pop(AS_DRAWN)
    found = {sources[n].name: verdict_of(share, wanted) for n, share in shares.items()}
    for row in out["ranking"]:
        row["verdict"] = found[row["source"]] if row["stage"] == work.stages[-1] else None
    for n, share in shares.items():
        zone, wider = sources[n].zone, looser(sources[n], work.study.ladder)
        out["verdicts"].append({
            "source": sources[n].name, "verdict": found[sources[n].name], "zone": zone_text(zone, sources[n].unit),
            "process": zone.process, "looser_zone": zone_text(wider, sources[n].unit), "looser_process": wider.process,
            "good_share": share.share, "good_low": share.low, "good_high": share.high, "as_drawn": drawn.share,
        })  # fmt: skip
    together, share, builds = open_together(work, shares)
    facts["builds"] += builds
    facts["open_together"] = [sources[n].name for n in together]
    facts |= {f"open_together_{k}": getattr(share, v, None) for k, v in (("good_share", "share"), ("low", "low"), ("high", "high"))}
    if verdict_of(drawn, wanted) == HOLD:
        facts["notes"].append(
            f"as drawn only {100 * drawn.share:.1f} % of builds are good, {100 * wanted:g} % are wanted: nothing can be opened, "
            "something has to be closed; see which measure loses most"
        )


def _curves(work, task, outcome):
    values = np.where(outcome.status > 0, np.nan, outcome.values)
    return curve_rows(work.curve_measures, values, stage=task.stage, solid=work.after.solid)


def _quantiles(values, wanted):
    values = values[np.isfinite(values)]
    if not len(values):
        return dict.fromkeys(wanted)
    return dict(zip(wanted, map(float, np.quantile(values, list(wanted.values()))), strict=True))


def _unit(measure):
    unit = KEYS[measure.of].unit
    if measure.take == "slope":
        return f"{unit} per {'deg' if measure.over == 'roll' else 'mm'}"
    return unit


def _number(value):
    value = float(value)
    return value if math.isfinite(value) else None

