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
/// them per_x x + per_y y + offset = edge.
struct FaceLines {
    double per_x, per_y, offset;
    std::vector<double> edges;
};

/// The faces that parallel sight lines are parallel to. Empty in perspective, and for cylinders (which are
/// curved on the map).
std::vector<FaceLines> edge_on_faces(const grid::Cells& cells, const Camera& camera);

/// Cuts a square along the lines and replaces `places` by the centroids of the pieces. One ray through each
/// integrates a function exactly that is linear on every piece, jumps included.
void cut_square(const Square& square, const std::vector<FaceLines>& lines, std::vector<Place>& places);

} // namespace aureole::maps
