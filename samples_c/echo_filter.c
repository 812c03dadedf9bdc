// echo_filter.c - 5x5 filter over a window of the water column image.
//
// The images are static: the recorder has a fixed window of 768 pings by 512 samples.
// Invented survey code; the images it was tried on come from a random generator.

#define PINGS   768u
#define SAMPLES 512u
#define REACH   2u
#define TAPS    (2u * REACH + 1u)

static float raw[PINGS][SAMPLES];
static float filtered[PINGS][SAMPLES];
static float kernel[TAPS][TAPS];
static unsigned char above[PINGS][SAMPLES];

// Each sample becomes the weighted sum of the 25 around it.
void filter_window(void)
{
    for (unsigned p = REACH; p < PINGS - REACH; p++) {
        for (unsigned s = REACH; s < SAMPLES - REACH; s++) {
            filtered[p][s] = 0.0f;
            for (unsigned dp = 0; dp < TAPS; dp++) {        // along the track
                for (unsigned ds = 0; ds < TAPS; ds++) {    // down the water column
                    filtered[p][s] += kernel[dp][ds] * raw[p + dp - REACH][s + ds - REACH];
                }
            }
        }
    }
}

// Mark what stands out of the noise.
void mark_window(float noise, int used_pings)
{
    int p;
    for (p = 0; p < used_pings; p++)
        for (unsigned s = 0; s < SAMPLES; s++)
        {
            if (filtered[p][s] > noise)
                above[p][s] = 1;
            else
                above[p][s] = 0;
        }
}

// Hand a sample in and out; the window itself stays in this file.
void put_sample(unsigned ping, unsigned sample, float value)
{
    raw[ping % PINGS][sample % SAMPLES] = value;
}

void put_tap(unsigned row, unsigned column, float value)
{
    kernel[row % TAPS][column % TAPS] = value;
}

int sample_is_above(unsigned ping, unsigned sample)
{
    return above[ping % PINGS][sample % SAMPLES];
}
