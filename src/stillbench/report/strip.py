"""The strip against the limit: interval as a bar, estimate as a tick, limit as a longer tick, on one scale from zero."""

from stillbench.foundation.rounding import significant
from stillbench.report.words import VerdictRow

WIDTH = 170.0
LIMIT_AT = 110.0
HEIGHT = 18.0
END = WIDTH - 6.0


def strip(row: VerdictRow) -> str:
    """Return the strip as SVG; a value off the scale is an arrow at the end with its number."""
    scale = LIMIT_AT / row.limit_value
    middle = HEIGHT / 2.0
    parts = [f'<line x1="0" y1="{middle}" x2="{END:.1f}" y2="{middle}" class="base"/>']
    words = f"limit {row.limit}"
    if row.value is not None and row.lower is not None and row.upper is not None:
        words = f"found {row.found}, limit {row.limit} {row.unit}"
        left, right = (min(max(0.0, end * scale), END) for end in (row.lower, row.upper))
        if left < END:
            parts.append(
                f'<rect x="{left:.1f}" y="{middle - 4}" width="{max(1.5, right - left):.1f}" height="8" class="bar"/>'
            )
        at = row.value * scale
        if at <= END:
            parts.append(
                f'<line x1="{at:.1f}" y1="{middle - 5.5}" x2="{at:.1f}" y2="{middle + 5.5}" class="estimate"/>'
            )
        else:
            parts.append(f'<path d="M{END:.1f} {middle - 5} l6 5 l-6 5 z" class="arrow"/>')
            parts.append(
                f'<text x="{END - 4:.1f}" y="{middle - 3}" text-anchor="end">{significant(row.value, 2)}</text>'
            )
        if row.upper * scale > END and at <= END:
            parts.append(f'<path d="M{END:.1f} {middle - 5} l6 5 l-6 5 z" class="arrow"/>')
    parts.append(f'<line x1="{LIMIT_AT}" y1="{middle - 8.5}" x2="{LIMIT_AT}" y2="{middle + 8.5}" class="limit"/>')
    escaped = words.replace("&", "&amp;").replace("<", "&lt;").replace('"', "&quot;")
    return f'<svg class="strip" viewBox="0 0 {WIDTH:.0f} {HEIGHT:.0f}" role="img" aria-label="{escaped}">{"".join(parts)}</svg>'
