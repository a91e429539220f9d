#!/usr/bin/python3
# SPDX-License-Identifier: GPL-3.0-or-later
"""What a user of SciPy would run, on the same files.
    contender.py step MATRIX STEPS            seconds of one step of scipy.sparse.linalg.lsqr
    contender.py loop MATRIX DAMPING ...      lsqr at its default settings for each damping
    contender.py script FOLDER OUT [DAMPING...]   the shortest script from CSV to parameters.csv; with dampings: a loop
    contender.py read FOLDER                  Python's csv with dictionaries, rows a second
    contender.py spsolve MATRIX               normal equations by spsolve"""
import csv
import sys
import time

import numpy as np
import scipy.sparse as sp
import scipy.sparse.linalg as sl

from generate import read_matrix


def tell(name, start):
    print(f'{name}_wall {time.monotonic() - start[0]:.9g}\n{name}_cpu {time.process_time() - start[1]:.9g}')


def now():
    return time.monotonic(), time.process_time()


def step(path, steps):
    A, b, _ = read_matrix(path)
    A = A.tocsr()
    settings = {'atol': 0, 'btol': 0, 'conlim': 0}
    sl.lsqr(A, b, iter_lim=1, **settings)
    spans = []
    for count in (1, 1 + int(steps)):
        start = now()
        sl.lsqr(A, b, iter_lim=count, **settings)
        spans.append([x - y for x, y in zip(now(), start)])
    for word, first, last in zip(('wall', 'cpu'), *spans):
        print(f'step_{word} {(last - first) / int(steps):.9g}')


def loop(path, dampings):
    A, b, sigma = read_matrix(path)
    A, b = sp.diags(1 / sigma) @ A.tocsr(), b / sigma
    start, steps = now(), 0
    for damping in dampings:
        steps += sl.lsqr(A, b, damp=float(damping))[2]
    tell('loop', start)
    print('steps', steps)


def script(folder, out, dampings):
    rows = list(csv.DictReader(open(folder + '/observations.csv')))
    names = [r['parameter'] for r in csv.DictReader(open(folder + '/parameters.csv'))]
    of_row, of_column = {r['observation']: i for i, r in enumerate(rows)}, {p: j for j, p in enumerate(names)}
    i, j, v = [], [], []
    with open(folder + '/design.csv') as file:
        reader = csv.reader(file)
        next(reader)
        for observation, parameter, coefficient in reader:
            i.append(of_row[observation])
            j.append(of_column[parameter])
            v.append(float(coefficient))
    sigma = np.array([float(r['sigma']) for r in rows])
    b = np.array([float(r['value']) for r in rows]) / sigma
    A = sp.diags(1 / sigma) @ sp.csr_matrix((v, (i, j)), shape=(len(rows), len(names)))
    models = [sl.lsqr(A, b, damp=float(damping))[0] for damping in dampings]
    with open(out, 'w') as file:
        writer = csv.writer(file)
        writer.writerow(['parameter', *dampings])
        writer.writerows(zip(names, *models))


def read(folder):
    of_row, of_column, v, i, j = {}, {}, [], [], []
    start = now()
    with open(folder + '/design.csv') as file:
        reader = csv.reader(file)
        next(reader)
        for observation, parameter, coefficient in reader:
            i.append(of_row.setdefault(observation, len(of_row)))
            j.append(of_column.setdefault(parameter, len(of_column)))
            v.append(float(coefficient))
    A = sp.csc_matrix((v, (i, j)))
    tell('read', start)
    print('rows', A.nnz)


def spsolve(path):
    A, b, _ = read_matrix(path)
    start = now()
    sl.spsolve((A.T @ A).tocsc(), A.T @ b)
    tell('solve', start)


def main():
    kind, arguments = sys.argv[1], sys.argv[2:]
    if kind == 'step':
        step(*arguments)
    elif kind == 'loop':
        loop(arguments[0], arguments[1:])
    elif kind == 'script':
        script(arguments[0], arguments[1], arguments[2:])
    elif kind == 'read':
        read(arguments[0])
    else:
        spsolve(arguments[0])


main()
