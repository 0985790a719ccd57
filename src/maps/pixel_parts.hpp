#pragma once

#include "maps/camera.hpp"

#include "aureole/grid/cells.hpp"

#include <vector>

namespace aureole::maps {

/// A square part of a pixel, side 2^-level, in pixel coordinates.
struct Square {
    double x, y;
    int level;
};

/// A place on the map and the area it stands for, as a share of its square.
struct Place {
    double x, y, share;
};

/// Cell faces seen edge-on by all sight lines: straight lines on the map at which the intensity jumps. Along
/// them per_x x + per_y y + offset = edge. Across them, from one line to the next, it is constant: the sight
/// lines cross the same cells at the same places along the other axes.
struct FaceLines {
    double per_x, per_y, offset;
    std::vector<double> edges;
};

/// The families of lines that are parallel to the columns (steps along x) or rows (steps along y) of the map.
struct Steps {
    const FaceLines* along_x = nullptr;
    const FaceLines* along_y = nullptr;
};
Steps steps(const std::vector<FaceLines>& lines);

/// Number of the strip that a place lies in.
std::size_t strip(const FaceLines& lines, double x, double y);

/// The faces that parallel sight lines are parallel to. Empty in perspective, and for cylinders (which are
/// curved on the map).
std::vector<FaceLines> edge_on_faces(const grid::Cells& cells, const Camera& camera);

/// Cuts a square along the lines and replaces `places` by the centroids of the pieces. One ray through each
/// integrates a function exactly that is linear on every piece, jumps included.
void cut_square(const Square& square, const std::vector<FaceLines>& lines, std::vector<Place>& places);

} // namespace aureole::maps
