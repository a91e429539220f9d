/** model.vtk: the model as a legacy text file of the Visualization Toolkit format (version 3.0), an open
 * format that 3-D viewers read: cells of a rectilinear grid when the coordinates fill one, else points.
 * Fields: estimate, sigma, resolution, hits, coverage. Source of the format: The VTK User's Guide, Kitware
 * 2010, "VTK file formats", legacy part. */
#ifndef LW_RUN_VTK_H
#define LW_RUN_VTK_H

#include "run/run.h"

/** LW_BAD_USAGE when no parameter has coordinates. */
lw_status lw_write_vtk(const lw_run *run, const char *path, lw_error *error);

#endif
