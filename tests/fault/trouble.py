#!/usr/bin/env python3
# SPDX-License-Identifier: GPL-3.0-or-later
"""Full disks, missing permission, kills, cut and hostile files: never a crash, never a half-written run."""
import json
import os
import random
import resource
import shutil
import signal
import subprocess
import sys
import time

sys.dont_write_bytecode = True
sys.path.insert(0, os.path.join(os.path.dirname(os.path.abspath(__file__)), '..', 'command', 'lib'))
from case import DEMO, PROGRAM, Case, crosshole, leastwise, levelling, sanitized, scratch, small
from tap import Skip, add, equal, matches, run, test


def whole(out):
    """A run folder that exists is whole: every table ends with a newline, the summary is valid."""
    names = os.listdir(out)
    assert 'summary.json' in names and 'report.html' in names and 'parameters.csv' in names, names
    for name in names:
        with open(os.path.join(out, name), 'rb') as file:
            data = file.read()
        assert data.endswith(b'\n') or name == 'report.html', name
    with open(os.path.join(out, 'summary.json')) as file:
        json.load(file)


def limited(size):
    """What a child does before the program starts: no file may grow beyond size; the signal is ignored, so that writing fails."""
    def prepare():
        signal.signal(signal.SIGXFSZ, signal.SIG_IGN)
        resource.setrlimit(resource.RLIMIT_FSIZE, (size, size))
    return prepare


@test('writing fails at any byte: exit 5, a message, nothing left')
def _():
    case = Case().copy_of(os.path.join(DEMO, 'crest-2025'))
    case.must('solve')
    sizes = {os.path.getsize(os.path.join(case.out, n)) for n in os.listdir(case.out)}
    largest = max(sizes)
    # report and summary hold seconds and the command's words, so their sizes vary by some bytes from run to run
    limits = sorted({0, 1, 100, largest // 2, largest - 500} | {s - 500 for s in sizes if s > 1000} | {largest * k // 9 for k in range(9)})
    for command, words in (('solve', []), ('pack', [])):
        for limit in limits:
            out = os.path.join(case.folder, f'{command}-{limit}')
            done = leastwise(command, case.problem, *words, '--out', out, preexec_fn=limited(limit), restore_signals=False)
            if done.returncode == 0 and command == 'pack':
                continue  # the pack is smaller than that
            equal(done.returncode, 5, f'{command}, limit {limit}: {done.stderr}')
            matches(done.stderr, r'\S', f'{command}, limit {limit}')
            left = [n for n in os.listdir(case.folder) if n.startswith(command)]
            assert all(os.listdir(os.path.join(case.folder, n)) == [] for n in left if command == 'pack') and (command == 'pack' or not left), left
            for name in left:
                shutil.rmtree(os.path.join(case.folder, name))


@test('writing fails while an older run is to be replaced: the older run stays')
def _():
    case = Case().copy_of(os.path.join(DEMO, 'crest-2025'))
    case.must('solve')
    before = {n: case.file(n) for n in os.listdir(case.out)}
    done = case.run('solve', '--overwrite', '--variance', 'estimated', preexec_fn=limited(3000), restore_signals=False)
    equal(done.returncode, 5, done.stderr)
    equal({n: case.file(n) for n in os.listdir(case.out)}, before)
    equal(case.left(), ['out'])


@test('a small disk that is full')
def _():
    if os.geteuid() != 0:
        raise Skip('mounting a small disk needs root')
    case = Case().copy_of(os.path.join(DEMO, 'crest-2025'))
    disk = scratch()
    mounted = subprocess.run(['mount', '-t', 'tmpfs', '-o', 'size=16k', 'none', disk], capture_output=True, text=True)
    if mounted.returncode != 0:
        raise Skip('mounting is not allowed here')
    try:
        for command in ('solve', 'pack'):
            done = case.run(command, out=os.path.join(disk, command))
            if command == 'pack' and done.returncode == 0:
                continue
            equal(done.returncode, 5, done.stderr)
            matches(done.stderr, 'space|write', command)
            for where, folders, files in os.walk(disk):
                equal(files, [], command)
    finally:
        subprocess.run(['umount', disk], check=True)


@test('no permission to write, no such parent, a parent that is a file: exit 5 before the work, nothing left')
def _():
    case = Case(**small())
    for place in ('/proc/leastwise', os.path.join(case.folder, 'no', 'such', 'run'), os.path.join(case.path('design.csv'), 'run')):
        done = case.run('solve', out=place)
        equal(done.returncode, 5, f'{place}: {done.stderr}')
        matches(done.stderr, r'\S')
    equal(case.left(), [])


def as_nobody():
    os.setgroups([])
    os.setgid(65534)
    os.setuid(65534)


@test('a user without permission: a folder that may not be written, a file that may not be read')
def _():
    case = Case(**small())
    prepare, program = None, PROGRAM
    if os.geteuid() == 0:
        prepare, program = as_nobody, os.path.join(scratch(), 'leastwise')
        shutil.copy(PROGRAM, program)
        os.chmod(program, 0o755)
    run = lambda *words: subprocess.run([program, *words], capture_output=True, text=True, preexec_fn=prepare, cwd='/')
    os.chmod(case.folder, 0o555)
    try:
        if run('--version').returncode != 0:
            raise Skip('the program cannot be run by another user here')
        done = run('solve', case.problem, '--out', case.out)
        equal(done.returncode, 5, done.stderr)
        matches(done.stderr, 'ermission|cannot write')
        os.chmod(case.path('observations.csv'), 0)
        done = run('inspect', case.problem)
        equal(done.returncode, 5, done.stderr)
        matches(done.stderr, r'observations\.csv.*ermission')
    finally:
        os.chmod(case.folder, 0o755)
    equal(case.left(), [])


def files_in(folder):
    """How many files a folder holds; 0 when it was renamed between two looks."""
    try:
        return len(os.listdir(folder))
    except FileNotFoundError:
        return 0


@test('killed at any moment: no run folder of the final name, or a whole one')
def _():
    case = Case().copy_of(os.path.join(DEMO, 'cross-hole'))
    began = time.monotonic()
    case.must('sweep', codes=(0, 1), out=os.path.join(case.folder, 'first'))
    lasts, seen = time.monotonic() - began, 0
    for k in range(24):
        out = os.path.join(case.folder, f'out{k}')
        child = subprocess.Popen([PROGRAM, 'sweep', case.problem, '--out', out], stdout=subprocess.DEVNULL, stderr=subprocess.DEVNULL)
        if k < 12:
            time.sleep(lasts * (k + 0.5) / 12)
        else:  # while it writes: as soon as the sibling folder has some files in it
            end, want = time.monotonic() + 60, (k - 12) % 6
            while child.poll() is None and time.monotonic() < end:
                siblings = [n for n in os.listdir(case.folder) if n.startswith(f'out{k}.')]
                if siblings and files_in(os.path.join(case.folder, siblings[0])) >= want:
                    break
        child.send_signal(signal.SIGKILL)
        child.wait()
        if os.path.exists(out):
            whole(out)
        else:
            seen += 1
    assert seen > 0, 'no kill came in time'


@test('killed while an older run is replaced: the older or the newer one, whole')
def _():
    case = Case().copy_of(os.path.join(DEMO, 'crest-2025'))
    case.must('solve')
    for k in range(20):
        child = subprocess.Popen([PROGRAM, 'solve', case.problem, '--out', case.out, '--overwrite'], stdout=subprocess.DEVNULL, stderr=subprocess.DEVNULL)
        end = time.monotonic() + 30
        while child.poll() is None and time.monotonic() < end:
            siblings = [n for n in os.listdir(case.folder) if n.startswith('out.')]
            if siblings:
                time.sleep(0.0005 * k)
                break
        child.send_signal(signal.SIGKILL)
        child.wait()
        whole(case.out)
        for name in os.listdir(case.folder):
            if name.startswith('out.'):
                shutil.rmtree(os.path.join(case.folder, name))


def cut(problem, name, places):
    source = os.path.join(DEMO, problem, name)
    with open(source, 'rb') as file:
        data = file.read()
    chance = random.Random(len(data))
    head = data.index(b'\n', data.index(b'\nobservation' if b'\nobservation' in data else b'\nparameter')) + 40
    step = max(1, head // (places // 2))
    lengths = sorted({*range(0, head, step), *(chance.randrange(len(data)) for _ in range(places // 2)), len(data) - 1, len(data) - 2, len(data) - 3})
    case = Case().copy_of(os.path.join(DEMO, problem))
    for length in lengths:
        case.put(name, data[:length])
        done = case.run('inspect')
        assert done.returncode in (0, 3), f'cut at byte {length}: exit {done.returncode}: {done.stderr[:300]}'
        assert done.returncode == 0 or done.stderr, f'cut at byte {length}: no message'
        if length % 4 == 0:
            done = case.run('solve')
            assert done.returncode in (0, 3), f'solve, cut at byte {length}: exit {done.returncode}: {done.stderr[:300]}'
            equal(case.left(), ['out'] if done.returncode == 0 else [], f'cut at byte {length}')
            shutil.rmtree(case.out, ignore_errors=True)


for problem in ('crest-2025', 'plane'):
    for name in ('design.csv', 'observations.csv', 'parameters.csv'):
        add(f'cut files: {problem}/{name}', cut, problem, name, 60)


@test('bytes turned at random in every file: never a crash')
def _():
    chance = random.Random(11)
    files = {n: open(os.path.join(DEMO, 'plane', n), 'rb').read() for n in ('design.csv', 'observations.csv', 'parameters.csv')}
    case = Case().copy_of(os.path.join(DEMO, 'plane'))
    for k in range(150):
        name = chance.choice(list(files))
        data = bytearray(files[name])
        for _ in range(chance.choice((1, 1, 2, 8))):
            place = chance.randrange(len(data))
            kind = chance.randrange(3)
            if kind == 0:
                data[place] = chance.randrange(256)
            elif kind == 1:
                del data[place:place + chance.randrange(1, 30)]
            else:
                data[place:place] = chance.choice((b',', b'"', b'\n', b'\r', b'\0', b'#', b'-', b'e', b'1e308', b'\xef\xbb\xbf', b'nan'))
        case.put(name, bytes(data))
        done = case.run('inspect')
        assert done.returncode in (0, 2, 3, 4), f'{k}: exit {done.returncode}: {done.stderr[:300]}'
        case.put(name, files[name])


@test('strange files: a folder, a device, a pipe without a writer end, a very long line, a hundred thousand columns')
def _():
    case = Case(**small())
    os.remove(case.path('observations.csv'))
    os.mkdir(case.path('observations.csv'))
    done = case.run('solve')
    assert done.returncode in (3, 5), done.returncode
    matches(done.stderr, r'observations\.csv')
    case = Case(design=small()['design'])
    done = case.run('solve', '--observations', '/dev/null')
    equal(done.returncode, 3)
    case = Case(design=small()['design'], observations='observation,value\na,' + '1' * 3000000 + '\n')
    assert case.run('solve').returncode == 3
    case = Case(design=small()['design'], observations='observation,value' + ''.join(f',c{k}' for k in range(100000)) + '\n')
    equal(case.run('solve').returncode, 3)
    case = Case(design=small()['design'], observations=small()['observations'] + '"' + 'x' * 5000000)
    equal(case.run('solve').returncode, 3)


@test('numbers of extreme size: an answer or a refusal, never NaN as a number')
def _():
    for value in ('1e308', '1e-308', '5e-324', '1e200', '-1e308'):
        for column in (2, 3):
            fields = ['a', '1', '0.1']
            if value.startswith('-') and column == 3:
                continue
            fields[column - 1] = value
            for coefficient in ('1', value):
                case = Case(design=small()['design'].replace('a,x,1', f'a,x,{coefficient}'), observations=small()['observations'].replace('a,1,0.1', ','.join(fields)))
                done = case.run('solve')
                assert done.returncode in (0, 1, 3, 4), f'{value} {column} {coefficient}: exit {done.returncode}: {done.stderr}'
                if done.returncode in (0, 1):
                    text = case.file('parameters.csv').lower() + case.file('residuals.csv').lower()
                    assert b'nan' not in text and b'inf' not in text, f'{value} {column} {coefficient}: {text[:500]}'


@test('valgrind finds nothing in inspect, solve, sweep and pack')
def _():
    if not shutil.which('valgrind'):
        raise Skip('valgrind is not here')
    if sanitized():
        raise Skip('the program has the address sanitizer')
    case = Case()
    levelling(case, 3, 3)
    rays = Case()
    crosshole(rays, 3, 3, 5)
    for words in (['inspect', case.problem], ['solve', case.problem, '--out', case.out], ['pack', case.problem, '--out', case.out + '-pack'],
                  ['solve', rays.problem, '--engine', 'lsqr', '--damping', '1', '--out', rays.out], ['sweep', rays.problem, '--engine', 'dense', '--dampings', '0.1,1,10', '--out', rays.out + '-2'],
                  ['solve', rays.problem, '--engine', 'cholesky', '--damping', '1', '--prefer', 'flattest', '--out', rays.out + '-3']):
        done = subprocess.run(['valgrind', '-q', '--error-exitcode=99', '--leak-check=full', '--errors-for-leak-kinds=definite', PROGRAM, *words, '--threads', '1'],
                              capture_output=True, text=True, env={**os.environ, 'OPENBLAS_CORETYPE': 'Haswell', 'OPENBLAS_NUM_THREADS': '1'})
        if 'nrecognised instruction' in done.stderr:
            raise Skip('valgrind does not know an instruction of this machine')
        assert done.returncode in (0, 1), f'{words[0]}: {done.stderr[-3000:]}'


run()
