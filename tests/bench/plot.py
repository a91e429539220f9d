# SPDX-License-Identifier: GPL-3.0-or-later
"""Log-log plots of cost against size, as SVG written by hand."""
import math
from xml.sax.saxutils import escape

WIDTH, HEIGHT, LEFT, BOTTOM, TOP, RIGHT = 640, 400, 70, 50, 30, 190
COLOURS = ['#1b6ca8', '#c8553d', '#3c8d5a', '#8a5a9e', '#b58900', '#555555']
TITLES = {'growth-nonzeros': ('nonzeros', 'seconds a step'), 'growth-unknowns': ('unknowns n', 'seconds a solve'),
          'growth-observations': ('observations m, 10 000 cells', 'seconds a step'),
          'growth-dampings': ('number of dampings', 'processor seconds'), 'growth-rows': ('rows of design.csv', 'seconds to read')}


def decades(low, high):
    return range(math.floor(math.log10(low)), math.ceil(math.log10(high)) + 1)


def write(path, name, points):
    across, up = TITLES.get(name, ('x', 'y'))
    series = list(dict.fromkeys(p['series'] for p in points))
    xs, ys = [float(p['x']) for p in points], [float(p['y']) for p in points]
    x_ticks, y_ticks = decades(min(xs), max(xs)), decades(min(ys), max(ys))

    def place(x, y):
        u = (math.log10(x) - x_ticks[0]) / max(1, x_ticks[-1] - x_ticks[0])
        v = (math.log10(y) - y_ticks[0]) / max(1, y_ticks[-1] - y_ticks[0])
        return LEFT + u * (WIDTH - LEFT - RIGHT), HEIGHT - BOTTOM - v * (HEIGHT - BOTTOM - TOP)

    out = [f'<svg xmlns="http://www.w3.org/2000/svg" viewBox="0 0 {WIDTH} {HEIGHT}" font-family="sans-serif" font-size="12">',
           f'<rect width="{WIDTH}" height="{HEIGHT}" fill="white"/>']
    for k in x_ticks:
        x = place(10.0 ** k, 10.0 ** y_ticks[0])[0]
        out.append(f'<path d="M{x:.1f} {TOP}V{HEIGHT - BOTTOM}" stroke="#ddd"/>'
                   f'<text x="{x:.1f}" y="{HEIGHT - BOTTOM + 16}" text-anchor="middle">1e{k}</text>')
    for k in y_ticks:
        y = place(10.0 ** x_ticks[0], 10.0 ** k)[1]
        out.append(f'<path d="M{LEFT} {y:.1f}H{WIDTH - RIGHT}" stroke="#ddd"/>'
                   f'<text x="{LEFT - 6}" y="{y + 4:.1f}" text-anchor="end">1e{k}</text>')
    for number, label in enumerate(series):
        colour = COLOURS[number % len(COLOURS)]
        line = sorted((float(p['x']), float(p['y'])) for p in points if p['series'] == label)
        where = [place(x, y) for x, y in line]
        out.append(f'<polyline points="{" ".join(f"{x:.1f},{y:.1f}" for x, y in where)}" fill="none" stroke="{colour}" '
                   'stroke-width="2"/>')
        out += [f'<circle cx="{x:.1f}" cy="{y:.1f}" r="3" fill="{colour}"/>' for x, y in where]
        y = TOP + 14 + 18 * number
        out.append(f'<path d="M{WIDTH - RIGHT + 12} {y - 4}h18" stroke="{colour}" stroke-width="2"/>'
                   f'<text x="{WIDTH - RIGHT + 36}" y="{y}">{escape(label)}</text>')
    out.append(f'<text x="{(LEFT + WIDTH - RIGHT) / 2}" y="{HEIGHT - 12}" text-anchor="middle">{escape(across)}</text>'
               f'<text x="{LEFT}" y="{TOP - 12}" text-anchor="middle">{escape(up)}</text></svg>')
    with open(path, 'w') as file:
        file.write('\n'.join(out) + '\n')
