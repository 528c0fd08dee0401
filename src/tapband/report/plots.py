"""The figures of a result, as its methods; each draws on the axes given, or on its own."""

from __future__ import annotations

from typing import TYPE_CHECKING, cast

if TYPE_CHECKING:
    from matplotlib.axes import Axes

    from tapband.report.publish import Outcome


class Plots:
    """Figures of whatever holds the tables of a result."""

    @property
    def _drawn(self) -> Outcome:
        """Itself, as what the figures take."""
        return cast("Outcome", self)

    def plot_coefficient(self, coefficient: str, ax: Axes | None = None) -> Axes:
        """A coefficient against angle with its intervals."""
        from tapband.report.figures import coefficient as drawn

        return drawn(self._drawn, coefficient, ax=ax)

    def plot_pressure(self, point: str, ax: Axes | None = None) -> Axes:
        """Cp of one point along the chord with its band."""
        from tapband.report.figures import pressure

        return pressure(self._drawn, point, ax=ax)

    def plot_contributors(self, coefficient: str, point: str | None = None, ax: Axes | None = None) -> Axes:
        """The largest contributors to a coefficient's variance, at one point or on the mean of all."""
        from tapband.report.figures import contributors

        return contributors(self._drawn, coefficient, point, ax=ax)

    def plot_groups(self, coefficient: str, point: str, ax: Axes | None = None) -> Axes:
        """Linear shares and Sobol' indices of the groups of sources at one point."""
        from tapband.report.figures_rank import groups

        return groups(self._drawn, coefficient, point, ax=ax)

    def plot_taps_on_section(self, coefficient: str, point: str, ax: Axes | None = None) -> Axes:
        """Shares of the taps on the section's outline."""
        from tapband.report.figures_rank import taps_on_section

        return taps_on_section(self._drawn, coefficient, point, ax=ax)

    def plot_taps_along_chord(self, coefficient: str, point: str, ax: Axes | None = None) -> Axes:
        """Shares of the taps along the chord."""
        from tapband.report.figures_rank import taps_along_chord

        return taps_along_chord(self._drawn, coefficient, point, ax=ax)

    def plot_shares(self, coefficient: str, ax: Axes | None = None) -> Axes:
        """Shares of the groups of sources against angle."""
        from tapband.report.figures_rank import shares

        return shares(self._drawn, coefficient, ax=ax)

    def plot_drivers(self, ax: Axes | None = None) -> Axes:
        """The leading group of every point and coefficient."""
        from tapband.report.figures_rank import drivers

        return drivers(self._drawn, ax=ax)

    def plot_wiring(
        self, coefficient: str, point: str, source: str | None = None, ax: Axes | None = None
    ) -> Axes:
        """The interval that four wirings of the taps would give, of one source or of all of tap pressure."""
        from tapband.report.figure_wiring import wiring

        return wiring(self._drawn, coefficient, point, source, ax=ax)
