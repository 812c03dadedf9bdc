/* swath_transpose.c
 *
 * The sonar delivers a swath ping by ping; the mosaic wants it beam by beam.  Out of place and in place.
 * Invented seabed-survey code, run on invented data only.
 */

#include <stddef.h>
#include <stdint.h>

/* swath: pings x beams, turned: beams x pings, both without gaps between the rows */
void
turn_swath (float *turned, const float *swath, size_t pings, size_t beams)
{
  size_t ping, beam;

  for (ping = 0; ping < pings; ping++)
    for (beam = 0; beam < beams; beam++)
      turned[beam * pings + ping] = swath[ping * beams + beam];
}

/* The same for backscatter codes in a true two-dimensional array. */
void
turn_codes (unsigned pings, unsigned beams, uint16_t turned[restrict beams][pings],
            uint16_t codes[restrict pings][beams])
{
  for (unsigned ping = 0; ping < pings; ++ping)
    {
      for (unsigned beam = 0; beam < beams; ++beam)
        {
          turned[beam][ping] = codes[ping][beam];
        }
    }
}

/* A square swath turns in place: swap above and below the diagonal. */
void
turn_in_place (long n, double square[n][n])
{
  for (long row = 1; row < n; row++)
    for (long col = 0; col < row; col++)
      {
        double kept = square[row][col];
        square[row][col] = square[col][row];
        square[col][row] = kept;
      }
}
