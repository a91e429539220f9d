#!/usr/bin/env python3
# SPDX-License-Identifier: GPL-3.0-or-later
"""The fuzz targets over their corpora and over turns of them: no crash. Each file is a test of its own."""
import os
import random
import subprocess
import sys

sys.dont_write_bytecode = True
sys.path.insert(0, os.path.join(os.path.dirname(os.path.abspath(__file__)), '..', 'command', 'lib'))
from case import BUILD, SOURCE, scratch
from tap import add, run

FAULT = os.path.join(SOURCE, 'tests', 'fault')


def replay(target, *files):
    done = subprocess.run([os.path.join(BUILD, 'tests', 'fault', 'fuzz_' + target), *files], capture_output=True, text=True, timeout=300)
    assert done.returncode == 0, f'exit {done.returncode}: {done.stderr[-2000:]}'


def turned(target, folder):
    """Files of the corpus with bytes changed, cut and spliced, always the same way."""
    chance, place, names = random.Random(1), scratch(), sorted(os.listdir(folder))
    seeds = []
    for name in names:
        with open(os.path.join(folder, name), 'rb') as file:
            seeds.append(file.read())
    files = []
    for k in range(1000):
        data = bytearray(chance.choice(seeds))
        for _ in range(chance.randrange(1, 6)):
            at = chance.randrange(len(data) + 1)
            kind = chance.randrange(4)
            if kind == 0 and data:
                data[at - 1] = chance.randrange(256)
            elif kind == 1:
                del data[at:at + chance.randrange(1, 9)]
            elif kind == 2:
                data[at:at] = chance.choice((b',', b'"', b'""', b'\n', b'\r\n', b'\r', b'\0', b'#', b'%', b'1e400', b'-', b'\xff', b'\x1e', b' '))
            else:
                other = chance.choice(seeds)
                data[at:] = other[chance.randrange(len(other) + 1):]
        files.append(os.path.join(place, str(k)))
        with open(files[-1], 'wb') as file:
            file.write(data)
    replay(target, *files)


for target in ('csv', 'market', 'problem'):
    folder = os.path.join(FAULT, 'corpus-' + target)
    for name in sorted(os.listdir(folder)):
        add(f'{target}: {name}', replay, target, os.path.join(folder, name))
    add(f'{target}: a thousand turns of the corpus', turned, target, folder)
run()
