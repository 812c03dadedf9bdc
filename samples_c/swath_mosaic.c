/*
 * swath_mosaic.c - paint swaths into the mosaic of the survey area.
 *
 * Where a sounding lands is looked up in a table, so nobody can say from the text which soundings share a cell.
 * Reading through a table is harmless; writing through one is not.
 *
 * Invented survey code on invented ground.
 */
#include <stddef.h>

/* Several soundings may land in one cell: the sum depends on their order. */
void paint(size_t pings, size_t beams, double *mosaic, const double *depth, const int *cell)
{
    for (size_t p = 0; p < pings; p++)
    {
        for (size_t b = 0; b < beams; b++)
        {
            mosaic[cell[p * beams + b]] += depth[p * beams + b];
        }
    }
}

/* Lift a picture out of the mosaic: every pixel is written once, wherever it reads. */
void lift(int rows, int cols, float *restrict picture, const float *restrict mosaic, const int *restrict cell)
{
    for (int c = 0; c < cols; c++)
    {
        for (int r = 0; r < rows; r++)
        {
            picture[r * cols + c] = mosaic[cell[r * cols + c]];
        }
    }
}
