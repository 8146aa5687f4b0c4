#include "calib/picture_frame.h"

#include <glib.h>
#include <gsl/gsl_errno.h>
#include <math.h>

static const RfPictureFrame plain = {
    .width = 640, .height = 480, .pixel_aspect = 1.0, .px_per_m_x = 5e5, .px_per_m_y = 5e5};

static void check(const RfPictureFrame *frame, double x_px, double y_px, double x_m, double y_m)
{
    RfMetre got = rf_picture_frame_to_cell(frame, (RfPixel){x_px, y_px});
    g_assert_cmpfloat_with_epsilon(got.x, x_m, 1e-15);
    g_assert_cmpfloat_with_epsilon(got.y, y_m, 1e-15);
}

static void origin_is_the_first_pixel(void)
{
    RfPictureFrame frames[] = {plain, plain, plain};
    frames[1].k1 = 0.02;
    frames[2].gravity_rad = 0.3;
    for (size_t i = 0; i < G_N_ELEMENTS(frames); i++) check(&frames[i], 0.0, 0.0, 0.0, 0.0);
}

static void each_direction_of_fall(void)
{
    RfPictureFrame frame = plain;
    check(&frame, 50, 100, 1e-4, 2e-4);
    frame.gravity_rad = rf_picture_frame_direction_rad(RF_GRAVITY_UP);
    check(&frame, 50, 100, -1e-4, -2e-4);
    frame.gravity_rad =
        rf_picture_frame_direction_rad(RF_GRAVITY_LEFT); /* falls towards -x; right of that is +y... */
    check(&frame, -50, 0, 0.0, 1e-4);
    check(&frame, 0, 100, 2e-4, 0.0); /* ... turn the picture a quarter against the clock */
    frame.gravity_rad = rf_picture_frame_direction_rad(RF_GRAVITY_RIGHT);
    check(&frame, 50, 0, 0.0, 1e-4);
    check(&frame, 0, -100, 2e-4, 0.0);
}

static void a_rolled_camera(void)
{
    RfPictureFrame frame = plain;
    frame.gravity_rad = 0.05; /* falls a little towards the picture's left */
    check(&frame, -100 * sin(0.05), 100 * cos(0.05), 0.0, 2e-4);
    check(&frame, 100 * cos(0.05), 100 * sin(0.05), 2e-4, 0.0);
}

static void pixels_that_are_not_square(void)
{
    RfPictureFrame tape = {.width = 720,
                           .height = 576,
                           .pixel_aspect = 16.0 / 15.0,
                           .px_per_m_x = 496875.0,
                           .px_per_m_y = 530000.0};
    check(&tape, 496.875, 530.0, 1e-3, 1e-3);
    tape.gravity_rad = M_PI_4;
    check(&tape, 496.875, 530.0, sqrt(2.0) * 1e-3, 0.0);
}

static void distortion_is_taken_out(void)
{
    RfPictureFrame frame = plain;
    frame.k1 = -0.03;
    /* at the right edge's middle, rho^2 = (320/400)^2 for a half diagonal of 400: stretched by 1 - 0.03 * 0.64 */
    RfMetre edge = rf_picture_frame_to_cell(&frame, (RfPixel){319.5 + 320.0, 239.5});
    RfMetre middle = rf_picture_frame_to_cell(&frame, (RfPixel){319.5, 239.5});
    g_assert_cmpfloat_with_epsilon(edge.x - middle.x, 320.0 * (1.0 - 0.03 * 0.64) / 5e5, 1e-15);
    g_assert_cmpfloat_with_epsilon(edge.y, middle.y, 1e-15);
}

static const RfPictureFrame crooked = {.width = 720,
                                       .height = 576,
                                       .pixel_aspect = 16.0 / 15.0,
                                       .px_per_m_x = 4.97e5,
                                       .px_per_m_y = 5.31e5,
                                       .k1 = 0.04,
                                       .gravity_rad = 1.6};

static void jacobian_is_the_derivative(void)
{
    static const RfPixel places[] = {{0, 0}, {719, 575}, {359.5, 287.5}, {100, 400}, {600, 33}};
    for (size_t i = 0; i < G_N_ELEMENTS(places); i++) {
        double j[2][2], h_px = 0.01;
        RfPixel p = places[i];
        rf_picture_frame_jacobian(&crooked, p, j);
        RfMetre right = rf_picture_frame_to_cell(&crooked, (RfPixel){p.x + h_px, p.y});
        RfMetre left = rf_picture_frame_to_cell(&crooked, (RfPixel){p.x - h_px, p.y});
        RfMetre below = rf_picture_frame_to_cell(&crooked, (RfPixel){p.x, p.y + h_px});
        RfMetre above = rf_picture_frame_to_cell(&crooked, (RfPixel){p.x, p.y - h_px});
        g_assert_cmpfloat_with_epsilon(j[0][0], (right.x - left.x) / (2 * h_px), 1e-12);
        g_assert_cmpfloat_with_epsilon(j[1][0], (right.y - left.y) / (2 * h_px), 1e-12);
        g_assert_cmpfloat_with_epsilon(j[0][1], (below.x - above.x) / (2 * h_px), 1e-12);
        g_assert_cmpfloat_with_epsilon(j[1][1], (below.y - above.y) / (2 * h_px), 1e-12);
    }
}

static void sigmas_turn_with_the_picture(void)
{
    RfPictureFrame frame = plain;
    RfMetre sigma = rf_picture_frame_sigma_m(&frame, (RfPixel){10, 10}, (RfPixel){0.1, 0.2});
    g_assert_cmpfloat_with_epsilon(sigma.x, 0.1 / 5e5, 1e-18);
    g_assert_cmpfloat_with_epsilon(sigma.y, 0.2 / 5e5, 1e-18);
    frame.gravity_rad = rf_picture_frame_direction_rad(RF_GRAVITY_LEFT);
    sigma = rf_picture_frame_sigma_m(&frame, (RfPixel){10, 10}, (RfPixel){0.1, 0.2});
    g_assert_cmpfloat_with_epsilon(sigma.x, 0.2 / 5e5, 1e-18);
    g_assert_cmpfloat_with_epsilon(sigma.y, 0.1 / 5e5, 1e-18);
}

static void there_and_back(void)
{
    for (double x = 0; x <= 719; x += 71.9)
        for (double y = 0; y <= 575; y += 57.5) {
            RfPixel back;
            RfMetre at = rf_picture_frame_to_cell(&crooked, (RfPixel){x, y});
            g_assert_true(rf_picture_frame_to_picture(&crooked, at, &back));
            g_assert_cmpfloat_with_epsilon(back.x, x, 1e-6);
            g_assert_cmpfloat_with_epsilon(back.y, y, 1e-6);
        }
}

static void far_outside_has_no_pixel(void)
{
    RfPixel back;
    g_assert_false(rf_picture_frame_to_picture(&plain, (RfMetre){1.0, 0.0}, &back));
    RfPictureFrame barrel = plain;
    barrel.k1 = -0.3; /* folds over beyond the corner */
    g_assert_false(rf_picture_frame_to_picture(&barrel, (RfMetre){2e-3, 0.0}, &back));
}

int main(int argc, char **argv)
{
    gsl_set_error_handler_off();
    g_test_init(&argc, &argv, NULL);
    g_test_add_func("/picture_frame/to_cell/origin-is-the-first-pixel", origin_is_the_first_pixel);
    g_test_add_func("/picture_frame/to_cell/each-direction-of-fall", each_direction_of_fall);
    g_test_add_func("/picture_frame/to_cell/a-rolled-camera", a_rolled_camera);
    g_test_add_func("/picture_frame/to_cell/pixels-that-are-not-square", pixels_that_are_not_square);
    g_test_add_func("/picture_frame/to_cell/distortion-is-taken-out", distortion_is_taken_out);
    g_test_add_func("/picture_frame/jacobian/is-the-derivative", jacobian_is_the_derivative);
    g_test_add_func("/picture_frame/sigma/turns-with-the-picture", sigmas_turn_with_the_picture);
    g_test_add_func("/picture_frame/to_picture/there-and-back", there_and_back);
    g_test_add_func("/picture_frame/to_picture/far-outside-has-no-pixel", far_outside_has_no_pixel);
    return g_test_run();
}
