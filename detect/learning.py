"""What reviewed sheets teach the detector, and what of it is worth taking."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, field

from detect.doubt import MODELS, DoubtModel
from detect.fisher import ReviewedPixels, fisher_direction, reviewed_pixels
from detect.learned_sizes import Range, SizeOptions, in_pixels, learned_range
from detect.lesson import Decided, Lesson, decided, take_lesson, together
from detect.refit import RefitOptions, Refitted, best_cut, f1_at, recalibrated, refit
from detect.reviewed import Reviewed
from detect.taught import Lessons, Taught

Progress = Callable[[int, int], None]
Direction = tuple[float, float, float]


@dataclass(frozen=True, slots=True)
class LearnOptions:
    """What is learned from how much.

    Parameters
    ----------
    fewest_for_weights : int
        Reviewed spots below which only sizes are learned.
    loss : float
        F1 on photographs left out that refitted weights may lose by chance and still be taken.
    gain : float
        F1 on photographs left out that another range or direction must gain to be taken.
    gain_unasked : float
        The same for a range where none was asked for.
    gain_spots : float
        Beside that, so many spots' worth must be gained, for F1 of few spots is chance.
    sizes : SizeOptions
        How the range of sizes is learned.
    refit : RefitOptions
        How strongly weights and cut-off are held.
    """

    fewest_for_weights: int = 30
    loss: float = 0.01
    gain: float = 0.02
    gain_unasked: float = 0.005
    gain_spots: float = 3.0
    sizes: SizeOptions = field(default_factory=SizeOptions)
    refit: RefitOptions = field(default_factory=RefitOptions)


@dataclass(frozen=True, slots=True, eq=False)
class _Way:
    """One way to detect: how it looks at the photographs, and what it decides on those left out."""

    lessons: list[Lesson]
    left_out: Decided
    cut: float
    f1: float
    refitted: bool = False
    sized: bool = False
    directed: bool = False


def learn(
    reviewed: Sequence[Reviewed],
    *,
    tool_version: str,
    options: LearnOptions | None = None,
    progress: Progress | None = None,
) -> Taught:
    """Learn from reviewed sheets of one kind.

    Parameters
    ----------
    reviewed : sequence of Reviewed
        As `gather_reviewed` gives them.
    tool_version : str
        Version to be recorded.
    options : LearnOptions, optional
    progress : callable, optional
        Called with (done, total) looks at photographs.

    Returns
    -------
    Taught

    Notes
    -----
    What is learned must earn its place by leave-one-photograph-out cross-validation [1]_ (over two
    halves where there is but one photograph): refitted weights with their cut-off unless F1 falls
    by more than `options.loss`, then the range of sizes and the direction of colour if F1 rises by `options.gain`. What
    gains nothing stays as it was. Cut-off and calibration come from spots judged by weights that
    had not seen their photograph (where there is but one, from that one).

    References
    ----------
    .. [1] Stone M (1974). Cross-validatory choice and assessment of statistical predictions.
       Journal of the Royal Statistical Society B 36, 111-147.
    """
    school = _School(
        list(reviewed) if len(reviewed) > 1 else list(reviewed[0].halves()),
        list(reviewed),
        options or LearnOptions(),
        _Steps(progress, looks_at_most(len(reviewed))),
    )
    first, way, pixels = school.ways()
    return _taught(school, first, way, pixels, tool_version)


def looks_at_most(photographs: int) -> int:
    """Return how often photographs are looked at in learning, at most."""
    return 3 * max(2, photographs) + photographs


@dataclass(slots=True)
class _Steps:
    """Counts looks at photographs."""

    progress: Progress | None
    total: int
    done: int = 0

    def step(self) -> None:
        """Tell that one more look is done."""
        self.done += 1
        if self.progress is not None:
            self.progress(self.done, self.total)


@dataclass(frozen=True, slots=True)
class _School:
    """The reviewed photographs as they are left out in turn, and as they are."""

    folds: list[Reviewed]
    whole: list[Reviewed]
    options: LearnOptions
    steps: _Steps

    @property
    def prior(self) -> DoubtModel:
        """Weights of the kind."""
        return MODELS[self.whole[0].options.kind]

    @property
    def spots(self) -> int:
        """Number of reviewed spots."""
        return sum(len(each.real) + len(each.struck) for each in self.whole)

    @property
    def enough(self) -> bool:
        """Whether there are spots enough for more than sizes."""
        return self.spots >= self.options.fewest_for_weights

    @property
    def unit_mm(self) -> bool:
        """Whether every sheet has a scale."""
        return all(each.sheet.scale is not None for each in self.whole)

    @property
    def asked(self) -> Range | None:
        """The range of diameters asked for on all sheets, if it is one."""
        ranges = {each.options.diameter for each in self.whole}
        return ranges.pop() if len(ranges) == 1 else None

    def ways(self) -> tuple[_Way, _Way, list[ReviewedPixels]]:
        """Go through what could be learned; return how it was, the best way, and pixels."""
        lessons, pixels = [], []
        for each in self.folds:
            view, lesson = take_lesson(each, each.diameters_px, model=self.prior)
            lessons.append(lesson)
            if self.enough:
                pixels.append(reviewed_pixels(view, each, each.diameters_px))
            self.steps.step()
        first = self._as_it_was(lessons)
        way = first
        if self.enough:
            refitted = self._way(lessons, first)
            loss = self.options.loss if len(self.whole) > 1 else 0.0
            way = refitted if refitted.f1 >= first.f1 - loss else first
        way = self._better(
            way,
            self._sized(first),
            gain=self.options.gain if self.asked else self.options.gain_unasked,
        )
        if self.enough:
            way = self._better(way, self._directed(first, way, pixels), gain=self.options.gain)
        return first, way, pixels

    def look(self, each: Reviewed, sizes: Range | None, direction: Direction | None) -> Lesson:
        """Look at one photograph in another way."""
        diameters = each.diameters_px if sizes is None else in_pixels(sizes, each)
        lesson = take_lesson(each, diameters, model=self.prior, direction=direction)[1]
        self.steps.step()
        return lesson

    def range_of(self, reviewed: Sequence[Reviewed]) -> Range | None:
        """Learn the range of diameters."""
        return learned_range(reviewed, self.options.sizes, in_mm=self.unit_mm)

    def _as_it_was(self, lessons: list[Lesson]) -> _Way:
        """Judge by the kind's weights and cut-off."""
        cut = self.whole[0].options.most_doubt
        spots = together([decided(each, Refitted(self.prior).doubt(each)) for each in lessons])
        return _Way(lessons, spots, cut, f1_at(spots, cut))

    def _way(
        self, lessons: list[Lesson], first: _Way, *, sized: bool = False, directed: bool = False
    ) -> _Way:
        """Judge each photograph by what the others teach."""
        parts = []
        for k, lesson in enumerate(lessons):
            others = lessons[:k] + lessons[k + 1 :]
            known = Refitted(self.prior)
            if self.enough:
                known = refit(others, self.prior, options=self.options.refit)
            parts.append(decided(lesson, known.doubt(lesson)))
        spots, cut = together(parts), first.cut
        if self.enough:
            cut = best_cut(spots, first.left_out, first.cut, options=self.options.refit)
        return _Way(lessons, spots, cut, f1_at(spots, cut), self.enough, sized, directed)

    def _sized(self, first: _Way) -> _Way | None:
        """Look at each photograph with the range of sizes that the others teach."""
        ranges = [
            self.range_of(self.folds[:k] + self.folds[k + 1 :]) for k in range(len(self.folds))
        ]
        if None in ranges:
            return None
        lessons = [
            self.look(each, sizes, None) for each, sizes in zip(self.folds, ranges, strict=True)
        ]
        return self._way(lessons, first, sized=True)

    def _directed(self, first: _Way, way: _Way, pixels: list[ReviewedPixels]) -> _Way | None:
        """Look at each photograph along the direction that the others teach."""
        directions = [
            fisher_direction(pixels[:k] + pixels[k + 1 :]) for k in range(len(self.folds))
        ]
        if None in directions:
            return None
        sizes = self.range_of(self.whole) if way.sized else None
        lessons = [
            self.look(each, sizes, direction)
            for each, direction in zip(self.folds, directions, strict=True)
        ]
        return self._way(lessons, first, sized=way.sized, directed=True)

    def _better(self, way: _Way, other: _Way | None, *, gain: float) -> _Way:
        """Take another way if it gains enough."""
        gain += self.options.gain_spots / self.spots
        return way if other is None or other.f1 < way.f1 + gain else other


def _taught(
    school: _School,
    first: _Way,
    way: _Way,
    pixels: list[ReviewedPixels],
    tool_version: str,
) -> Taught:
    """Fit what is taken to all reviewed photographs."""
    sizes = school.range_of(school.whole) if way.sized else None
    direction = fisher_direction(pixels) if way.directed else None
    known, spots, cut = Refitted(school.prior), way.left_out, way.cut
    if way.refitted:
        lessons = first.lessons
        if way.sized or way.directed or school.folds != school.whole:
            lessons = [school.look(each, sizes, direction) for each in school.whole]
        known = refit(lessons, school.prior, options=school.options.refit)
        if len(lessons) == 1:
            # Weights of half a photograph say too little of where the whole one's cut-off lies.
            spots = decided(lessons[0], known.doubt(lessons[0]))
            cut = best_cut(spots, first.left_out, first.cut, options=school.options.refit)
    calibration = highest = None
    if school.enough:
        calibration = recalibrated(spots, cut)
        highest = float(f"{calibration.applied(cut):.5g}")
    asked = school.whole[0].options
    real, struck = (
        sum(len(getattr(each, name)) for each in school.whole) for name in ("real", "struck")
    )
    placed = sum(
        int((each.sheet.spots.counted & ~each.sheet.spots.found).sum()) for each in school.whole
    )
    return Taught(
        asked.kind,
        Lessons(
            tuple(
                (each.sheet.photograph.name, each.sheet.photograph.sha256) for each in school.whole
            ),
            real,
            min(placed, real),
            struck,
            round(first.f1, 4),
            round(way.f1, 4),
        ),
        known.model,
        highest,
        calibration,
        known.own_colour,
        asked.colour,
        asked.polarity,
        direction,
        sizes or school.asked,
        sizes is not None,
        tool_version,
    )
