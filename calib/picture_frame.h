/* The one place where stored pixels become metres in the cell: undistort, square the pixels, scale, turn so that gravity
 * points down. Not for a moving camera: positions are those in the reference picture.
 * All pure; safe from any thread. */
#pragma once

#include <stdbool.h>

#include "calib/units.h"

/* Which way things fall in the picture. */
typedef enum {
    RF_GRAVITY_DOWN,
    RF_GRAVITY_UP,
    RF_GRAVITY_LEFT,
    RF_GRAVITY_RIGHT,
} RfGravityDirection;

typedef struct {
    int width, height;             /* of the stored picture: the distortion's centre is its middle */
    double pixel_aspect;           /* width of a stored pixel over its height, > 0 */
    double px_per_m_x, px_per_m_y; /* stored pixels per metre, > 0 */
    double k1;                     /* radial distortion as in length_scale.h; 0: none */
    double gravity_rad; /* direction of fall in square pixels, from the picture's +y towards its -x */
} RfPictureFrame;

/* Down 0, left pi/2, up pi, right -pi/2; add the camera's roll to it. */
double rf_picture_frame_direction_rad(RfGravityDirection direction);

/* x across gravity (positive right once the picture is turned so that gravity points down), y along it; pixel (0, 0) -> (0, 0). */
RfMetre rf_picture_frame_to_cell(const RfPictureFrame *frame, RfPixel at);

/* jacobian[row][column]: metres (row 0 across, 1 along gravity) per stored pixel (column 0 along x, 1 along y). */
void rf_picture_frame_jacobian(const RfPictureFrame *frame, RfPixel at, double jacobian[2][2]);

/* Standard uncertainties carried through the Jacobian; those of x and y in the picture taken as independent. */
RfMetre rf_picture_frame_sigma_m(const RfPictureFrame *frame, RfPixel at, RfPixel sigma_px);

/* The way back, for drawing; false when no pixel within a diagonal of the picture maps there. */
bool rf_picture_frame_to_picture(const RfPictureFrame *frame, RfMetre at, RfPixel *out);
