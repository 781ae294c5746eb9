"""Can anybody tell? A classifier that knows earlier campaigns guesses which slots of the next are live, and the area
under its curve (AUC: the chance that it puts a random live slot above a random null one of the same campaign; 0.5 is
blindness) gets an interval. Beside it every single observable is tried alone, with the level corrected for their number
by permutation (Westfall & Young 1993). The AUC is that of Mann & Whitney (1947), its standard error that of DeLong,
DeLong & Clarke-Pearson (1988)."""
import warnings

import numpy as np
from scipy import special, stats

FIRST = 10      # one in so many campaigns only begins the models
AGAIN = 8       # they are fitted again when there are so much more: an eighth
FEW = 8         # campaigns below which the effect of a slot's place can't be learnt
SPARSE = 0.8    # of the penalty at which blind observables would all stay out
STEPS = 150


def ranks(x):
    return np.apply_along_axis(stats.rankdata, 0, x)


class Game:
    """All slots of all campaigns, stacked; numbers seen from their own campaign and their place in it."""

    def __init__(self, played):
        names = sorted(set().union(*(p[0] for p in played)))
        blocks, self.live, self.group, place = [], [], [], []
        for i, (own, table, live) in enumerate(played):
            at = {n: k for k, n in enumerate(own)}
            missing = np.full(len(live), np.nan)
            blocks.append(np.column_stack([table[:, at[n]] if n in at else missing for n in names]))
            self.live.append(live)
            self.group.append(np.full(len(live), i))
            place.append(np.arange(len(live)))
        raw = np.vstack(blocks)
        self.live, self.group, place = np.concatenate(self.live), np.concatenate(self.group), np.concatenate(place)
        with warnings.catch_warnings():
            warnings.simplefilter('ignore', RuntimeWarning)
            varies = np.nanmax(raw, 0) > np.nanmin(raw, 0)
            self.constant = [n for n, v in zip(names, varies) if not v]
            x = raw[:, varies]
            self.names = [n for n, v in zip(names, varies) if v]
            # neither the campaign (a busy machine) nor the place in it (the first slot) says live or null
            x = x - self._centres(x, self.group)
            if len(played) >= FEW:
                x = x - self._centres(x, place)
                x = x - self._centres(x, self.group)
            # what is left of a constant that was centred is rounding
        keep = np.nanmax(np.abs(x), 0) > 1e-9 * np.nanmax(np.abs(raw[:, varies]), 0)
        self.constant += [n for n, k in zip(self.names, keep) if not k]
        self.names = [n for n, k in zip(self.names, keep) if k]
        x = np.nan_to_num(x[:, keep])
        # how far from usual, either way, is an observable of its own
        self.features = self._normal(np.hstack([x, np.abs(x)]))
        self.features /= np.maximum(self.features.std(0), 1e-12)

    def _normal(self, x):
        """Normal scores of ranks within campaigns (van der Waerden 1952): a hiccup is no more than the last rank."""
        out = np.zeros_like(x)
        for g in np.unique(self.group):
            rows = self.group == g
            out[rows] = special.ndtri(ranks(x[rows]) / (rows.sum() + 1))
            out[rows] -= out[rows].mean(0)
        return out

    @staticmethod
    def _centres(x, by):
        """Means without the outer tenths: a median would jump where an observable has two values."""
        out = np.zeros_like(x)
        for g in np.unique(by):
            rows = by == g
            low, high = np.nanpercentile(x[rows], [10, 90], axis=0)
            m = np.nanmean(np.clip(x[rows], low, high), axis=0)
            out[rows] = np.where(np.isfinite(m), m, 0)
        return out

    def scores(self):
        """Each slot's score by a model that was fitted on earlier campaigns only. Scores of the first campaigns are
        missing: with them the models begin. What is won in a campaign then has the mean of a guess whatever was won
        before, and spreads add up; in cross-validation, where each part helps to judge the others, they do not."""
        out = np.full(len(self.live), np.nan)
        campaigns = int(self.group.max()) + 1
        at = max(1, campaigns // FIRST)
        while at < campaigns:
            to = min(campaigns, at + max(1, at // AGAIN))
            test = (self.group >= at) & (self.group < to)
            known = self.group < at
            out[test] = self.features[test] @ logistic(self.features[known], self.live[known])
            at = to
        return out

    def auc(self, score):
        """AUC within campaigns, its standard error, and both parts of every campaign for the bootstrap."""
        won, pairs, variance = [], [], []
        for g in np.unique(self.group):
            s, y = score[self.group == g], self.live[self.group == g]
            if np.isnan(s).any():
                continue
            n1, n0 = int(y.sum()), int((~y).sum())
            if n1 == 0 or n0 == 0:
                continue
            r = stats.rankdata(s)
            v1 = (r[y] - stats.rankdata(s[y])) / n0         # of each live slot: the share of nulls below it
            v0 = 1 - (r[~y] - stats.rankdata(s[~y])) / n1
            won.append(v1.sum() * n0)
            pairs.append(n1 * n0)
            # in small samples the estimated spread may vanish: never below that of a guess
            guess = (n1 + n0 + 1) / (12 * n1 * n0)
            delong = (v1.var(ddof=1) / n1 if n1 > 1 else 0) + (v0.var(ddof=1) / n0 if n0 > 1 else 0)
            variance.append(max(delong, guess if n1 < 2 or n0 < 2 else 0))
        won, pairs, variance = map(np.array, (won, pairs, variance))
        return won.sum() / pairs.sum(), np.sqrt((pairs ** 2 * variance).sum()) / pairs.sum(), won, pairs

    def alone(self, rng, times):
        """The observable that tells most by itself: name, AUC, and the chance of one as strong among blind ones."""
        r = np.zeros((len(self.live), self.features.shape[1]))
        pairs = 0
        for g in np.unique(self.group):
            rows = self.group == g
            y = self.live[rows]
            r[rows] = ranks(self.features[rows]) - (len(y) + 1) / 2
            pairs += y.sum() * (~y).sum()
        sums = self.live @ r
        # in units of its own spread under permutation, so that ties and small campaigns count for what they are
        spread = np.zeros(r.shape[1])
        for g in np.unique(self.group):
            rows = self.group == g
            n, n1 = rows.sum(), self.live[rows].sum()
            spread += n1 * (n - n1) / max(n * (n - 1), 1) * (r[rows] ** 2).sum(0)
        spread = np.sqrt(np.maximum(spread, 1e-12))
        z = np.abs(sums) / spread
        best = int(z.argmax())
        beaten = 0
        order = self.live.astype(float)
        index = [np.flatnonzero(self.group == g) for g in np.unique(self.group)]
        for _ in range(times):
            for i in index:
                order[i] = order[rng.permutation(i)]
            beaten += (np.abs(order @ r) / spread).max() >= z[best]
        name = (self.names + ['|%s|' % n for n in self.names])[best]
        return name, 0.5 + sums[best] / pairs, (beaten + 1) / (times + 1)


def logistic(x, y):
    """Weights of a logistic regression under an absolute penalty (Tibshirani 1996), by accelerated proximal steps (Beck
    & Teboulle 2009): of hundreds of observables a leak touches a few."""
    n, p = x.shape
    target = y - y.mean()
    penalty = SPARSE * np.sqrt(n * y.var() * 2 * np.log(max(p, 2)))
    penalty = min(penalty, 0.8 * np.abs(x.T @ target).max())  # something always comes in
    step = 4 / np.linalg.eigvalsh(x.T @ x)[-1]
    w = ahead = np.zeros(p)
    shift, t = special.logit(min(max(y.mean(), 0.01), 0.99)), 1.0
    for _ in range(STEPS):
        v = ahead + step * (x.T @ (y - special.expit(x @ ahead + shift)))
        new = np.sign(v) * np.maximum(np.abs(v) - step * penalty, 0)
        t, was = (1 + np.sqrt(1 + 4 * t * t)) / 2, t
        ahead = new + (was - 1) / t * (new - w)
        w = new
    return w


def judge(played, level, rng, times=999):
    """A dictionary of the verdict at this level of confidence."""
    g = Game(played)
    score = g.scores()
    auc, error, won, pairs = g.auc(score)
    judged = g.live[~np.isnan(score)]
    half = stats.norm.ppf(0.5 + level / 2) * error
    low, high = max(auc - half, 0), min(auc + half, 1)
    if len(won) >= 30:  # enough campaigns for a bootstrap over them: the wider of the two counts
        pick = rng.integers(0, len(won), (2000, len(won)))
        again = np.sort(won[pick].sum(1) / pairs[pick].sum(1))
        low = min(low, again[int((0.5 - level / 2) * 1999)])
        high = max(high, again[int((0.5 + level / 2) * 1999)])
    name, single, p = g.alone(rng, times)
    return {'slots': len(g.live), 'live': int(g.live.sum()), 'judged_live': int(judged.sum()),
            'judged_null': int((~judged).sum()), 'observables': len(g.names), 'constant': g.constant,
            'auc': auc, 'low': low, 'high': high, 'half': (high - low) / 2, 'level': level,
            'strongest': name, 'strongest_auc': single, 'strongest_p': p,
            'blind': bool(low <= 0.5 <= high and p > 1 - level)}
