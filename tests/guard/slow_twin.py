"""The slow twin: the guard's rules again, from their descriptions, as one straightforward loop over single samples.

It shares no code with the guard.  It keeps the whole stream and looks back over it for every sample, so nothing is
screened, carried over or trimmed.  One state, all blocks energised.
"""

from dataclasses import dataclass, field

from hvhost.guard.limits import GuardLimits
from hvhost.samples.blocks import SampleBlock


@dataclass
class Twin:
    """Judges a list of blocks; ``hits`` are (rule name, sample index), the first of a rule in each block."""

    limits: GuardLimits
    hits: list[tuple[str, int]] = field(default_factory=list)
    odd: dict[str, int] = field(default_factory=dict)

    def judge(self, blocks: list[SampleBlock]) -> None:
        """Run every rule over the whole stream."""
        raw: list[tuple[str, int]] = []
        raw += self.amplitude("OVERCURRENT", blocks, [c for b in blocks for c in b.i], self.limits.overcurrent)
        raw += self.amplitude("OVERVOLTAGE", blocks, [c for b in blocks for c in b.v], self.limits.overvoltage)
        raw += self.level(blocks)
        raw += self.breakdown(blocks)
        raw += self.lasting("SATURATED", blocks)
        raw += self.lasting("REVERSED", blocks)
        raw += self.lasting("MISSING", blocks)
        raw += self.stuck(blocks)
        raw += [("GAP", b.index) for b in blocks if b.gap]
        seen = set()
        for name, index in sorted(raw, key=lambda hit: hit[1]):
            number = next(n for n, b in enumerate(blocks) if b.index <= index < b.index + len(b.v))
            if (name, number) not in seen:
                seen.add((name, number))
                self.hits.append((name, index))

    def amplitude(self, name: str, blocks: list[SampleBlock], codes: list[int], limit: int) -> list[tuple[str, int]]:
        """N samples in a row above the limit; shorter excursions are counted when they end."""
        indices = stream(blocks)
        hits = []
        k = 0
        while k < len(codes):
            if codes[k] <= limit:
                k += 1
                continue
            end = k
            while end < len(codes) and codes[end] > limit:
                end += 1
            if end - k >= self.limits.persist:
                hits.append((name, indices[k + self.limits.persist - 1]))
            elif end < len(codes):
                self.odd[name] = self.odd.get(name, 0) + 1
            k = end
        return hits

    def level(self, blocks: list[SampleBlock]) -> list[tuple[str, int]]:
        """Above the level for a time, counted by sample index; n samples at or below it in a row end it."""
        need = max(self.limits.level_samples, self.limits.persist)
        indices, codes = stream(blocks), [c for b in blocks for c in b.i]
        hits: list[tuple[str, int]] = []
        begin, below, told = None, 0, False
        for index, code in zip(indices, codes, strict=True):
            if self.limits.level and code > self.limits.level:
                begin, below = (index if begin is None else begin), 0
                if index - begin + 1 >= need and not told:
                    told = True
                    hits.append(("OVERCURRENT_LEVEL", index))
            elif begin is not None:
                below += 1
                if below == self.limits.persist:
                    begin, below, told = None, 0, False
        return hits

    def lasting(self, name: str, blocks: list[SampleBlock]) -> list[tuple[str, int]]:
        """Conditions on one sample that must last: saturated, reversed, missing."""
        lim = self.limits
        hits = []
        for which in ("v", "i"):
            run = 0
            for b in blocks:
                for k in range(len(b.v)):
                    if name == "SATURATED":
                        low, high = lim.v_limits if which == "v" else lim.i_limits
                        code = b.v[k] if which == "v" else b.i[k]
                        bad, need = code <= low or code >= high, lim.saturated_samples
                    elif name == "REVERSED" and which == "v":
                        bad, need = b.v[k] < -lim.zero_band, lim.persist
                    elif name == "REVERSED":
                        above = b.v[k] > b.v_word * lim.v_map_q16 // 65536 + lim.zero_band
                        bad, need = b.i[k] < -lim.i_band and not above, lim.missing_samples
                    else:
                        bad = which == "v" and b.v_word >= lim.missing_word and b.v[k] <= lim.zero_band
                        need = lim.missing_samples
                    run = run + 1 if bad else 0
                    if run == need:
                        hits.append((name, b.index + k))
        return hits

    def stuck(self, blocks: list[SampleBlock]) -> list[tuple[str, int]]:
        """The same code for a time while the word is not near zero."""
        hits: list[tuple[str, int]] = []
        last, run = None, 0
        for b in blocks:
            for k, code in enumerate(b.v):
                if not self.limits.stuck_samples or b.v_word < self.limits.missing_word:
                    last, run = None, 0
                    continue
                run = run + 1 if code == last else 1
                last = code
                if run == self.limits.stuck_samples:
                    hits.append(("STUCK", b.index + k))
        return hits

    def breakdown(self, blocks: list[SampleBlock]) -> list[tuple[str, int]]:
        """Unexplained falls: base held by n samples within the w before, less words and drain, n in a row."""
        lim = self.limits
        indices = stream(blocks)
        v, i = [c for b in blocks for c in b.v], [c for b in blocks for c in b.i]
        owner = [b for b in blocks for _ in b.v]
        n, hits, run, base, from_, current, words = lim.persist, [], 0, 0, 0, 0, (0, 0)
        for k in range(1, len(v)):
            if run == 0:
                window = range(max(0, k - lim.drop_samples), k)
                base = max(min(v[max(0, j - n + 1):j + 1]) for j in window)
                if base - v[k] <= lim.drop:
                    continue
                from_ = indices[window[0]]
                pairs = [min(i[j], i[j - 1]) for j in range(window[0] - lim.delay_samples, window[0] + 1) if j >= 1]
                current = max(0, max(pairs) if pairs else i[0])
                words = self.words(blocks, from_ - lim.delay_samples, owner[k].index)
            else:
                words = (min(words[0], owner[k].v_word), max(words[1], owner[k].v_word))
            ahead = (indices[k] - owner[k].index) * lim.fall_q16 // 65536
            lowest = min(words[0] * lim.v_map_q16 // 65536,
                         max(0, owner[k].v_word * lim.v_map_q16 // 65536 - ahead))
            explained = words[1] * lim.v_map_q16 // 65536 - lowest
            explained += min(current * lim.drain_q16 * (indices[k] - from_) // 65536, max(0, base) // 2)
            if base - v[k] - explained > lim.drop:
                run += 1
                if run == n:
                    hits.append(("BREAKDOWN", indices[k]))
            elif run:
                if run < n:
                    self.odd["BREAKDOWN"] = self.odd.get("BREAKDOWN", 0) + 1
                run = 0
        return hits

    @staticmethod
    def words(blocks: list[SampleBlock], start: int, last: int) -> tuple[int, int]:
        """Extremes of the words known at any sample of the window; one stays known until the next."""
        known = [(b.index, b.v_word) for b in blocks if b.index <= last]
        values = [known[0][1]] if start < known[0][0] else []
        for x in range(start, last + 1):
            values += [[word for index, word in known if index <= x][-1]] if x >= known[0][0] else []
        values.append(known[-1][1])
        return min(values), max(values)


def stream(blocks: list[SampleBlock]) -> list[int]:
    """Sample indices of all blocks."""
    return [b.index + k for b in blocks for k in range(len(b.v))]
