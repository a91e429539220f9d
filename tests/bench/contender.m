% SPDX-License-Identifier: GPL-3.0-or-later
% Octave's A\b of a matrix file: octave-cli contender.m MATRIX
arguments = argv();
file = fopen(arguments{1}, 'rb');
head = fread(file, 4, 'int64');
start = fread(file, head(2) + 1, 'int64');
row = fread(file, head(3), 'int32') + 1;
if (mod(head(3), 2)) fread(file, 1, 'int32'); end
value = fread(file, head(3), 'double');
b = fread(file, head(1), 'double');
fclose(file);
column = repelems(1:head(2), [1:head(2); diff(start)'])';
A = sparse(row, column, value, head(1), head(2));
clear row column value
wall = tic; processor = cputime;
x = A \ b;
printf('solve_cpu %.9g\nsolve_wall %.9g\n', cputime - processor, toc(wall));
