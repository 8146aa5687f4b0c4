#!/usr/bin/env python3
"""How fast risefall is against decoding alone, and how its time grows: the table and the chart in DEVELOPERS.md.

    python3 tests/bench/speed.py BUILD [--short] [--out DIR] [--footage DIR] [--into DEVELOPERS.md]

BUILD is a build directory with cli/risefall and tests/decode_only. Films 640x480, 1280x720 and 1920x1080, each as H.264,
MJPEG and FFV1, with 10, 60 and 300 droplets, then runs, one after the other and so five rounds long: decode_only with 2
threads and with 1, `risefall paths`, `risefall run` and `risefall calibrate`. Medians are reported. A run during which
anything else took more than 15 % of a core is repeated, up to three times; if all were disturbed, its figure bears a *.

About an hour on two cores, most of it for filming 1920x1080 the first time (--footage keeps the films); --short, with
3 rounds, H.264 and 60 droplets alone and a quarter of the frames, some ten minutes. Python's standard library only."""

import argparse
import math
import os
import re
import shutil
import statistics
import subprocess
import sys
import tempfile
import time

SIZES = ((640, 480), (1280, 720), (1920, 1080))
CODECS = {'h264': 'H.264', 'mjpeg': 'MJPEG', 'ffv1': 'FFV1'}
DROPLETS = (10, 60, 300)
OTHERS_SHARE = 0.15  # of one core
TRIES = 4
TICK_S = 1 / os.sysconf('SC_CLK_TCK')

SCENE = '''[picture]
width={width}
height={height}
frame_rate=30 Hz
duration={duration} s
px_per_mm={px_per_mm}
seed=20260601
[reticle]
spacing=0.1000(2) mm
[droplets]
count={droplets}
least_units=1
most_units=6
sign=minus
[video]
codec={codec}
quality={quality}
'''


class Run:
    """Wall, CPU and peak memory of one command, and whether it had the machine to itself."""

    def __init__(self, command):
        before, start = busy_s(), time.monotonic()
        child = subprocess.Popen(command, stdout=subprocess.DEVNULL, stderr=subprocess.PIPE)
        words = child.stderr.read().decode(errors='replace')
        _, status, usage = os.wait4(child.pid, 0)
        child.returncode = os.waitstatus_to_exitcode(status)
        self.wall_s = time.monotonic() - start
        self.cpu_s = usage.ru_utime + usage.ru_stime
        self.memory_mb = usage.ru_maxrss / 1024
        self.others = max(0.0, busy_s() - before - self.cpu_s) / self.wall_s
        if child.returncode not in (0, 3):  # 3: nothing could be measured
            sys.exit(f'{" ".join(command)}: exit {child.returncode}: {words.strip()}')


def busy_s():
    """Seconds that all cores together have been at work, for us or for others (also outside of a virtual machine)."""
    with open('/proc/stat', encoding='ascii') as stat:
        ticks = [int(word) for word in stat.readline().split()[1:9]]
    return (sum(ticks) - ticks[3] - ticks[4]) * TICK_S


def undisturbed(command):
    runs = []
    for _ in range(TRIES):
        runs.append(Run(command))
        if runs[-1].others <= OTHERS_SHARE:
            break
    return min(runs, key=lambda run: run.others)


class Figures:
    """Medians over the rounds of one command."""

    def __init__(self, runs):
        self.wall_s = statistics.median(run.wall_s for run in runs)
        self.cpu_s = statistics.median(run.cpu_s for run in runs)
        self.memory_mb = max(run.memory_mb for run in runs)
        self.mark = '*' if any(run.others > OTHERS_SHARE for run in runs) else ''


def rounds_of(commands, rounds):
    """Interleaved, so that a slow minute hits all of them."""
    runs = {name: [] for name in commands}
    for _ in range(rounds):
        for name, command in commands.items():
            runs[name].append(undisturbed(command))
    return {name: Figures(of) for name, of in runs.items()}


class Bench:
    def __init__(self, options, work):
        self.risefall = os.path.join(options.build, 'cli', 'risefall')
        self.decode_only = os.path.join(options.build, 'tests', 'decode_only')
        self.footage = options.footage or os.path.join(work, 'footage')
        self.work = work
        self.rounds = 3 if options.short else 5
        self.duration_s = 10 if options.short else 40
        for program in (self.risefall, self.decode_only):
            if not os.access(program, os.X_OK):
                sys.exit(f'{program} is not there: ninja -C {options.build}')

    def film(self, width, height, codec, droplets):
        """Folder with sheet.ini and the recording; filmed unless it is there already."""
        name = f'{height}-{codec}-{droplets}-{self.duration_s}s'
        folder = os.path.join(self.footage, name)
        if os.path.exists(os.path.join(folder, 'sheet.ini')):
            return folder
        say(f'filming {name}')
        os.makedirs(self.footage, exist_ok=True)
        scene = os.path.join(self.footage, name + '.scene')
        with open(scene, 'w', encoding='ascii') as out:
            out.write(SCENE.format(width=width, height=height, duration=self.duration_s, px_per_mm=width / 1.3,
                                   droplets=droplets, codec=codec, quality=3 if codec == 'mjpeg' else 18))
        subprocess.run([self.risefall, 'simulate', scene, '--out', folder, '--quiet'], check=True)
        return folder

    def commands(self, folder):
        sheet, result = os.path.join(folder, 'sheet.ini'), os.path.join(self.work, 'result')
        video = recording(folder)
        return {
            'decode 2': [self.decode_only, video, '2'],
            'paths': [self.risefall, 'paths', sheet, '--quiet', '--threads=2', '--out', result],
            'decode 1': [self.decode_only, video, '1'],
            'run': [self.risefall, 'run', sheet, '--quiet', '--threads=2', '--out', result],
            'learn': [self.risefall, 'calibrate', sheet, '--quiet', '--threads=2'],
        }

    def case(self, width, height, codec, droplets):
        folder = self.film(width, height, codec, droplets)
        say(f'measuring {width}x{height} {CODECS[codec]}, {droplets} droplets')
        figures = rounds_of(self.commands(folder), self.rounds)
        return {'size': f'{width}x{height}', 'codec': CODECS[codec], 'droplets': droplets,
                'frames': self.duration_s * 30, 'figures': figures}

    def longer(self, folder, times):
        """A sheet whose recording is that of `folder` several times in a row."""
        with open(os.path.join(folder, 'sheet.ini'), encoding='utf-8') as sheet:
            text = sheet.read()
        path = os.path.join(self.work, f'longer-{times}.ini')
        with open(path, 'w', encoding='utf-8') as out:
            out.write(re.sub(r'(?m)^video=.*$', 'video=' + ';'.join([recording(folder)] * times), text))
        return path

    def growth_in_frames(self, factors):
        folder = self.film(640, 480, 'h264', 60)
        say('growth with frames')
        result = os.path.join(self.work, 'result')
        commands = {n: [self.risefall, 'run', self.longer(folder, n), '--quiet', '--threads=2', '--out', result]
                    for n in factors}
        return rounds_of(commands, self.rounds)

    def growth_in_droplets(self, counts):
        films = {n: self.film(1280, 720, 'h264', n) for n in counts}
        say('growth with droplets')
        commands = {}
        for n, folder in films.items():
            every = self.commands(folder)
            commands.update({(n, name): every[name] for name in ('decode 1', 'run')})
        return rounds_of(commands, self.rounds)


def say(words):
    print(words, file=sys.stderr, flush=True)


def recording(folder):
    with open(os.path.join(folder, 'sheet.ini'), encoding='utf-8') as sheet:
        return os.path.abspath(os.path.join(folder, re.search(r'(?m)^video *= *(.+)$', sheet.read()).group(1)))


def exponent(points):
    """Slope of a straight line through logarithms."""
    logs = [(math.log(x), math.log(y)) for x, y in points]
    mean_x, mean_y = (statistics.mean(side) for side in zip(*logs))
    return (sum((x - mean_x) * (y - mean_y) for x, y in logs) / sum((x - mean_x) ** 2 for x, _ in logs))


def ratio(a, b, of):
    return f'{getattr(a, of) / getattr(b, of):.2f}{a.mark or b.mark}'


def shares(figures):
    """Of the CPU of a run: decoding, learning (its decoding included), finding and linking, measuring and writing."""
    whole = figures['run'].cpu_s
    decode, learn = figures['decode 1'].cpu_s, figures['learn'].cpu_s
    parts = (decode, learn, figures['paths'].cpu_s - decode - learn, whole - figures['paths'].cpu_s)
    return ' / '.join(f'{100 * max(0.0, part) / whole:.0f}' for part in parts)


def table(cases):
    head = ('size', 'codec', 'droplets', 'frames/s of run', 'paths / decode 2, wall', 'run / decode 2, wall',
            'paths / decode 1, CPU', 'run / decode 1, CPU', 'peak MB', 'decode / learn / find, link / rest, % of CPU')
    lines = ['| ' + ' | '.join(head) + ' |', '|' + '---|' * len(head)]
    for case in cases:
        f = case['figures']
        cells = (case['size'], case['codec'], case['droplets'], f"{case['frames'] / f['run'].wall_s:.0f}{f['run'].mark}",
                 ratio(f['paths'], f['decode 2'], 'wall_s'), ratio(f['run'], f['decode 2'], 'wall_s'),
                 ratio(f['paths'], f['decode 1'], 'cpu_s'), ratio(f['run'], f['decode 1'], 'cpu_s'),
                 f"{f['run'].memory_mb:.0f}", shares(f))
        lines.append('| ' + ' | '.join(str(cell) for cell in cells) + ' |')
    return '\n'.join(lines)


PLOT = '''set terminal svg size 760,300 dynamic font 'sans-serif,12'
set output '{out}'
set logscale xy
set key top left
set grid
set multiplot layout 1,2
set xlabel 'frames, times {frames}'
set ylabel 'CPU of risefall run, s'
plot '-' using 1:2 with linespoints pt 7 title 'exponent {by_frames:.2f}'
{frame_rows}
e
set xlabel 'droplets in view'
set ylabel 'the same, less decoding, s'
plot '-' using 1:2 with linespoints pt 7 title 'exponent {by_droplets:.2f}'
{droplet_rows}
e
unset multiplot
'''


def rows(points):
    return '\n'.join(f'{x} {y:.3f}' for x, y in points)


def chart(path, bench, frames, droplets):
    """Draws both growths; returns their exponents, that in droplets from 100 on, where they set the time."""
    by_frames = exponent(frames)
    by_droplets = exponent([point for point in droplets if point[0] >= 100])
    script = PLOT.format(out=path, frames=bench.duration_s * 30, by_frames=by_frames, by_droplets=by_droplets,
                         frame_rows=rows(frames), droplet_rows=rows(droplets))
    subprocess.run(['gnuplot', '-d'], input=script.encode(), check=True)
    return by_frames, by_droplets


def commit_of(path):
    words = ['git', '-C', os.path.dirname(os.path.abspath(path)), 'describe', '--always', '--dirty', '--abbrev=10']
    return subprocess.run(words, check=True, capture_output=True, text=True).stdout.strip()


def fill_in(path, text):
    """Between the two marks of a document."""
    with open(path, encoding='utf-8') as document:
        before, _, rest = document.read().partition('<!-- speed.py -->\n')
    _, _, after = rest.partition('<!-- /speed.py -->')
    if not after:
        sys.exit(f'{path}: the marks <!-- speed.py --> and <!-- /speed.py --> are needed')
    with open(path, 'w', encoding='utf-8') as document:
        document.write(f'{before}<!-- speed.py -->\n{text}\n<!-- /speed.py -->{after}')


def measure(options, work):
    bench, commit = Bench(options, work), commit_of(__file__)
    codecs = ('h264',) if options.short else tuple(CODECS)
    droplets = (60,) if options.short else DROPLETS
    cases = [bench.case(*size, codec, n) for size in SIZES for codec in codecs for n in droplets]
    factors, counts = (1, 2, 4, 8), (10, 30, 100, 300, 1000)
    by_frames, by_droplets = bench.growth_in_frames(factors), bench.growth_in_droplets(counts)
    frames = [(n, by_frames[n].cpu_s) for n in factors]
    beyond = [(n, max(1e-3, by_droplets[n, 'run'].cpu_s - by_droplets[n, 'decode 1'].cpu_s)) for n in counts]
    os.makedirs(options.out, exist_ok=True)
    exponents = chart(os.path.join(options.out, 'speed.svg'), bench, frames, beyond)
    return (f'Measured at commit {commit}, {os.cpu_count()} cores, {bench.rounds} rounds of '
            f'{bench.duration_s * 30} frames; * marks figures during which other work took more than 15 % of a core.\n\n'
            f'{table(cases)}\n\nCPU of a run grows as frames to the power {exponents[0]:.2f}, and what it takes beyond '
            f'decoding as droplets (100 to 1000 in view) to the power {exponents[1]:.2f}.\n\n'
            '![Growth with frames and with droplets](tests/bench/speed.svg)')


def main():
    parser = argparse.ArgumentParser(description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter)
    parser.add_argument('build')
    parser.add_argument('--short', action='store_true')
    parser.add_argument('--out', default=os.path.dirname(os.path.abspath(__file__)), help='speed.svg goes there')
    parser.add_argument('--footage', help='keeps the films for another time')
    parser.add_argument('--into', help='document whose marked part is replaced by the table')
    options = parser.parse_args()
    work = tempfile.mkdtemp(prefix='risefall-speed-')
    try:
        text = measure(options, work)
    finally:
        shutil.rmtree(work)
    print(text)
    if options.into:
        fill_in(options.into, text)


if __name__ == '__main__':
    main()
