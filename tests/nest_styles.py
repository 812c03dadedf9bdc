"""Loop nests in the many ways of writing C: (what is special, text, sizes to run it at).  All code is invented."""

STYLES: tuple[tuple[str, str, dict[str, int]], ...] = (
    ("down le", """\
void sweep(int pings, double *depth) {
    for (int i = pings - 1; i >= 0; i--) depth[i] = i; }
""", {"pings": 5}),
    ("down minus", """\
void sweep(int pings, double *depth) { int i;
    for (i = pings; i > 0; i -= 2) depth[i] = 1; }
""", {"pings": 7}),
    ("up step", """\
void sweep(int pings, double *depth) { int i;
    for (i = 1; i <= pings; i = i + 3) depth[i] = 1; }
""", {"pings": 9}),
    ("up step2", """\
void sweep(int pings, double *depth) { int i;
    for (i = 1; pings >= i; i = 2 + i) depth[i] = 1; }
""", {"pings": 9}),
    ("not equal", """\
void sweep(int pings, double *depth) {
    for (int i = 0; i != pings; ++i) depth[i] = 1; }
""", {"pings": 4}),
    ("not equal u", """\
void sweep(unsigned pings, unsigned beams, double *depth) {
    for (unsigned i = beams; i != pings; ++i) depth[i] = 1; }
""", {"pings": 4, "beams": 2}),
    ("countdown", """\
void sweep(unsigned pings, double *depth) {
    for (unsigned i = pings; i-- > 0;) depth[i] = 1; }
""", {"pings": 4}),
    ("countdown ne", """\
void sweep(unsigned pings, double *depth) {
    for (unsigned i = pings; i-- != 0;) depth[i] = 1; }
""", {"pings": 4}),
    ("countdown plain", """\
void sweep(int pings, double *depth) {
    for (int i = pings; i--;) depth[i] = 1; }
""", {"pings": 4}),
    ("countdown pre", """\
void sweep(int pings, double *depth) {
    for (int i = pings; --i >= 0;) depth[i] = 1; }
""", {"pings": 4}),
    ("scaled", """\
void sweep(int pings, double *depth) {
    for (int i = 0; 2*i < pings; i++) depth[i] = 1; }
""", {"pings": 7}),
    ("shifted", """\
void sweep(int pings, double *depth) {
    for (int i = 0; i + 1 < pings; i++) depth[i+1] = depth[i]; }
""", {"pings": 5}),
    ("u minus", """\
void sweep(unsigned pings, double *depth) {
    for (unsigned i = 0; i < pings - 1; i++) depth[i] = 1; }
""", {"pings": 5}),
    ("size minus", """\
#include <stddef.h>
void sweep(size_t pings, double *depth) {
    for (size_t i = 1; i + 1 < pings; i++) depth[i] = depth[i-1] + depth[i+1]; }
""", {"pings": 5}),
    ("mixed sign", """\
#include <stddef.h>
void sweep(size_t pings, double *depth) {
    for (int i = 0; i < pings; i++) depth[i] = 1; }
""", {"pings": 5}),
    ("both", """\
void sweep(int pings, int width, double *depth) {
    for (int i = 0; i < pings && i <= width; i++) depth[i] = 1; }
""", {"pings": 5, "width": 2}),
    ("ternary end", """\
void sweep(int pings, int width, double *depth) {
    for (int i = 0; i < (pings < width ? pings : width); i++) depth[i] = 1; }
""", {"pings": 5, "width": 3}),
    ("tiles", """\
#define MIN(x, y) ((x) < (y) ? (x) : (y))
void sweep(int pings, double *depth) {
    for (int ii = 0; ii < pings; ii += 4)
    for (int i = ii; i < MIN(ii + 4, pings); i++) depth[i] += 1; }
""", {"pings": 10}),
    ("ternary first step", """\
void sweep(int pings, int width, double *depth) {
    for (int i = pings > width ? width : pings; i < 12; i += 2) depth[i] = 1; }
""", {"pings": 5, "width": 3}),
    ("half", """\
void sweep(int pings, double *depth) {
    for (int i = 0; i < pings / 2; i++) { double t = depth[i];
        depth[i] = depth[pings - 1 - i]; depth[pings - 1 - i] = t; } }
""", {"pings": 7}),
    ("half u", """\
void sweep(unsigned pings, double *depth) {
    for (unsigned i = 0; i < pings / 2; i++) depth[2*i] = depth[2*i+1]; }
""", {"pings": 7}),
    ("shift", """\
void sweep(unsigned pings, double *depth) {
    for (unsigned i = 0; i < pings >> 1; i++) depth[i << 1] = 3; }
""", {"pings": 7}),
    ("and mask", """\
void sweep(int pings, double *depth) {
    for (int i = 0; i < pings; i++) depth[(i & 1) * 8 + (i >> 1)] = 3; }
""", {"pings": 7}),
    ("modulo row", """\
void sweep(int pings, int beams, double depth[2][beams]) {
    for (int t = 0; t < pings; t++)
    for (int j = 0; j < beams; j++) depth[(t+1)%2][j] = depth[t%2][j]; }
""", {"pings": 4, "beams": 3}),
    ("div idx", """\
void sweep(int pings, double *depth, double *restrict echo) {
    for (int i = 0; i < pings; i++) echo[i/2] += depth[i]; }
""", {"pings": 7}),
    ("ptr sum", """\
void sweep(int pings, int beams, double *depth) {
    for (int i = 0; i < pings; i++)
    for (int j = 0; j < beams; j++) *(depth + i*beams + j) = 1; }
""", {"pings": 3, "beams": 4}),
    ("row ptr", """\
void sweep(int pings, int beams, double *depth, const double *restrict echo) {
    for (int i = 0; i < pings; i++) { double *row = depth + i*beams;
    for (int j = 0; j < beams; j++) row[j] += echo[j]; } }
""", {"pings": 3, "beams": 4}),
    ("row ptr arr", """\
void sweep(int pings, int beams, double depth[pings][beams]) {
    for (int i = 0; i < pings; i++) { double *row = depth[i];
    for (int j = 0; j < beams; j++) row[j] += 1; } }
""", {"pings": 3, "beams": 4}),
    ("row ptr addr", """\
void sweep(int pings, int beams, double depth[pings][beams]) {
    for (int i = 0; i < pings; i++) { double *row = &depth[i][0];
    for (int j = 0; j < beams; j++) row[j] += 1; } }
""", {"pings": 3, "beams": 4}),
    ("old ptr", """\
void sweep(int pings, int beams, double *depth) { int i, j; double *row;
    for (i = 0; i < pings; i++) { row = &depth[i*beams];
    for (j = 0; j < beams; j++) row[j] += 1; } }
""", {"pings": 3, "beams": 4}),
    ("idx var", """\
void sweep(int pings, int beams, double *depth) {
    for (int i = 0; i < pings; i++)
    for (int j = 0; j < beams; j++) { int at = i*beams + j; depth[at] = depth[at] + 1; } }
""", {"pings": 3, "beams": 4}),
    ("idx base", """\
#include <stddef.h>
void sweep(size_t pings, size_t beams, double *depth) {
    for (size_t i = 0; i < pings; i++) { const size_t base = i*beams;
    for (size_t j = 0; j < beams; j++) depth[base + j] += 1; } }
""", {"pings": 3, "beams": 4}),
    ("three", """\
void sweep(int pings, int beams, int k, double *depth) {
    for (int x = 0; x < pings; x++)
    for (int y = 0; y < beams; y++)
    for (int z = 0; z < k; z++) depth[(x*beams + y)*k + z] = 1; }
""", {"pings": 2, "beams": 3, "k": 4}),
    ("three2", """\
void sweep(int pings, int beams, int k, double *depth) {
    for (int x = 0; x < pings; x++)
    for (int y = 0; y < beams; y++)
    for (int z = 0; z < k; z++) depth[x*beams*k + y*k + z] += depth[z]; }
""", {"pings": 2, "beams": 3, "k": 4}),
    ("two n", """\
void sweep(int pings, double *depth) {
    for (int i = 0; i < pings; i++)
    for (int j = 0; j < 2*pings; j++) depth[i*2*pings + j] = 1; }
""", {"pings": 3}),
    ("two rows", """\
void sweep(int pings, double *depth) {
    for (int i = 0; i < pings; i++)
    for (int j = 0; j < pings; j++) depth[2*i*pings + j] = 1; }
""", {"pings": 3}),
    ("rim", """\
void sweep(int pings, int beams, double *depth) {
    for (int i = 1; i <= pings; i++)
    for (int j = 1; j <= beams; j++) depth[i*(beams+2) + j] =
        depth[(i-1)*(beams+2) + j] + depth[i*(beams+2) + j - beams - 2]; }
""", {"pings": 3, "beams": 4}),
    ("colmajor", """\
void sweep(int pings, int beams, int stride, double *depth) {
    for (int i = 0; i < pings; i++)
    for (int j = 0; j < beams; j++) depth[i + j*stride] += 1; }
""", {"pings": 3, "beams": 4, "stride": 5}),
    ("chan", """\
void sweep(int pings, int beams, unsigned char *depth) {
    for (int i = 0; i < pings; i++)
    for (int j = 0; j < beams; j++)
    for (int c = 0; c < 3; c++) depth[(i*beams + j)*3 + c] = c; }
""", {"pings": 3, "beams": 4}),
    ("struct arr", """\
struct sounding { double x, y; int tag; };
void sweep(int pings, struct sounding *points) {
    for (int i = 0; i < pings; i++) points[i].x = points[i].y + 1; }
""", {"pings": 4}),
    ("struct in", """\
struct sounding { double v[3]; };
void sweep(int pings, struct sounding *points) {
    for (int i = 0; i < pings; i++)
    for (int c = 0; c < 3; c++) points[i].v[c] = 1; }
""", {"pings": 4}),
    ("guard", """\
void sweep(int pings, double *depth) {
    for (int i = 0; i < pings; i++) { if (i > 1 && i != 3) depth[i] = 1; else depth[i] = depth[0]; } }
""", {"pings": 6}),
    ("guard mod", """\
void sweep(int pings, double *depth) {
    for (int i = 0; i < pings; i++) if (i % 3 == 1) depth[i] = 1; }
""", {"pings": 6}),
    ("if data", """\
void sweep(int pings, double *depth, double *restrict echo) {
    for (int i = 0; i < pings; i++) if (echo[i] > 0) { depth[i] = 1; if (i < 2) depth[i+9] = 3; } }
""", {"pings": 4}),
    ("n guard", """\
void sweep(int pings, int beams, double *depth) { if (pings > 2 && beams == 3)
    for (int i = 0; i < pings; i++) depth[i*beams] = 1; }
""", {"pings": 4, "beams": 3}),
    ("early", """\
void sweep(int pings, int beams, double *depth) { if (pings < 3 || beams < 2) return;
    for (int i = 0; i < pings - 1; i++) depth[i*beams + 1] = 1; }
""", {"pings": 4, "beams": 3}),
    ("uchar", """\
void sweep(unsigned char pings, double *depth) {
    for (unsigned char i = 0; i < pings; i++) depth[i] = 1; }
""", {"pings": 4}),
    ("short", """\
void sweep(short pings, double *depth) { short i;
    for (i = pings; i >= 1; --i) depth[i - 1] = 1; }
""", {"pings": 4}),
    ("long step", """\
void sweep(long pings, double *depth) {
    for (long i = pings - 1; i > -1; i += -2) depth[i] = 1; }
""", {"pings": 6}),
    ("u step", """\
void sweep(unsigned pings, double *depth) {
    for (unsigned i = 0; i < pings; i += 4) depth[i] = 1; }
""", {"pings": 10}),
    ("u neg offset", """\
void sweep(unsigned pings, unsigned beams, double *depth) {
    for (unsigned i = 1; i < pings; i++)
    for (unsigned j = 1; j < beams; j++) depth[i*beams + j - 1] = depth[(i-1)*beams + j]; }
""", {"pings": 3, "beams": 4}),
    ("tri", """\
void sweep(int pings, double depth[pings][pings]) {
    for (int i = 0; i < pings; i++)
    for (int j = i; j-- > 0;) depth[i][j] = depth[j][i]; }
""", {"pings": 4}),
    ("const 2d", """\
static double grid[4][6];
void sweep(void) {
    for (int i = 0; i < 4; i++)
    for (int j = 0; j < 6; j++) grid[i][j] = grid[3 - i][j]; }
""", {}),
    ("enum ", """\
enum { W = 3, H };
void sweep(double depth[H][W]) {
    for (int i = 0; i < H; i++)
    for (int j = 0; j < W; j++) depth[i][j] = 1; }
""", {}),
    ("sizeof ", """\
static double t[7];
void sweep(double *restrict depth) {
    for (unsigned i = 0; i < sizeof t / sizeof t[0]; i++) depth[i] = t[i]; }
""", {}),
    ("comma stmt", """\
void sweep(int pings, double *depth, double *restrict echo) {
    for (int i = 0; i < pings; i++) depth[i] = 0, echo[i] = 1; }
""", {"pings": 3}),
    ("incr", """\
void sweep(int pings, int *depth) {
    for (int i = 0; i < pings; i++) { depth[i]++; --depth[i + pings]; } }
""", {"pings": 3}),
    ("opaque nm", """\
void sweep(int pings, int beams, double *depth) {
    for (int i = 0; i < pings*beams; i++) depth[i] = 1; }
""", {"pings": 3, "beams": 2}),
    ("opaque off", """\
void sweep(int pings, int beams, double *depth) {
    for (int i = 0; i < pings; i++) depth[pings*beams + i] = depth[i]; }
""", {"pings": 3, "beams": 4}),
    ("inner end", """\
void sweep(int pings, double *depth) {
    for (int i = 0; i < pings; i++) { int hi = i + 3 < pings ? i + 3 : pings;
    for (int j = i; j < hi; j++) depth[j] += 1; } }
""", {"pings": 6}),
    ("band", """\
void sweep(int pings, int width, double *depth) {
    for (int i = 0; i < pings; i++)
    for (int k = i > width ? i - width : 0; k < pings && k <= i + width; k++) depth[i*pings + k] = 1; }
""", {"pings": 5, "width": 1}),
    ("skewed", """\
void sweep(int pings, int t, double depth[t][pings]) {
    for (int c = 0; c < t + pings - 1; c++)
    for (int i = (c - t + 1 > 0 ? c - t + 1 : 0); i < pings && i <= c; i++) depth[c - i][i] = 1; }
""", {"pings": 3, "t": 4}),
    ("cast idx", """\
#include <stddef.h>
void sweep(int pings, int beams, double *depth) {
    for (int i = 0; i < pings; i++)
    for (int j = 0; j < beams; j++) depth[(size_t)i * beams + j] = 1; }
""", {"pings": 3, "beams": 4}),
    ("int64", """\
#include <stdint.h>
void sweep(int64_t pings, int32_t beams, double *depth) {
    for (int64_t i = 0; i < pings; i++)
    for (int32_t j = 0; j < beams; j++) depth[i * beams + j] = 1; }
""", {"pings": 3, "beams": 4}),
    ("math", """\
#include <math.h>
static double sq(double x) { double y = x * x; return y; }
void sweep(int pings, double *depth) {
    for (int i = 0; i < pings; i++) depth[i] = sq(depth[i]) + fabs(depth[i]) + sqrt(depth[i]); }
""", {"pings": 3}),
    ("pp", """\
void sweep(int pings, double *depth) { int j;
    for (int i = 0; i < pings; i++)
    for (j = 0; j < i; j++) depth[j] += depth[i]; }
""", {"pings": 4}),
    ("neg step u", """\
void sweep(unsigned pings, double *depth) {
    for (unsigned i = pings; i > 0; i--) depth[i - 1] = 1; }
""", {"pings": 4}),
    ("u ge1", """\
void sweep(unsigned pings, double *depth) {
    for (unsigned i = pings; i >= 1; i--) depth[i - 1] = 1; }
""", {"pings": 4}),
    ("mem const idx", """\
void sweep(int pings, double *depth) {
    for (int i = 1; i < pings; i++) depth[0] += depth[i]; }
""", {"pings": 4}),
    ("ptr to arr", """\
void sweep(int pings, int beams, double (*depth)[beams]) {
    for (int i = 0; i < pings; i++)
    for (int j = 0; j < beams; j++) (*(depth + i))[j] = 1; }
""", {"pings": 3, "beams": 4}),
    ("local arr", """\
void sweep(int pings, double *depth) {
    for (int i = 0; i < pings; i++) { double width[3] = {1, 2, 3};
    for (int c = 0; c < 3; c++) depth[i*3 + c] = width[c]; } }
""", {"pings": 3}),
    ("multi decl", """\
void sweep(int pings, double *depth) {
    for (int i = 0; i < pings; i++) { double x = depth[i], y = x * 2; depth[i] = y; } }
""", {"pings": 3}),
    ("empty inner", """\
void sweep(int pings, double *depth) {
    for (int i = 0; i < pings; i++) { ; { depth[i] = 1; } } }
""", {"pings": 3}),
    ("ne down", """\
void sweep(int pings, double *depth) {
    for (int i = pings; i != 0; i--) depth[i - 1] = 1; }
""", {"pings": 3}),
    ("minus u big", """\
void sweep(unsigned pings, double *depth) {
    for (unsigned i = pings - 1; i >= 2; i -= 1) depth[i] = 1; }
""", {"pings": 6}),
    ("gt bound", """\
void sweep(int pings, int lo, double *depth) {
    for (int i = pings; lo < i; i--) depth[i] = 1; }
""", {"pings": 5, "lo": 2}),
    ("neg coef", """\
void sweep(int pings, double *depth) {
    for (int i = 0; -i > -pings; i++) depth[i] = 1; }
""", {"pings": 5}),
    ("self bound", """\
void sweep(int pings, double *depth) {
    for (int i = 0; i < pings - i; i++) depth[i] = depth[pings - 1 - i]; }
""", {"pings": 5}),
    ("paren", """\
void sweep(int pings, double *depth) {
    for (int i = (0); ((i)) < (pings); (i)++) (depth)[(i)] = (1); }
""", {"pings": 3}),
    ("flat2d", """\
void sweep(int pings,int beams,double depth[pings][beams]){ double *points=&depth[0][0];
    for (int i=0;i<pings;i++)
    for (int j=0;j<beams;j++) points[i*beams+j]=depth[i][j]; }
""", {"pings": 3, "beams": 4}),
    ("flat static", """\
static double grid[4][6];
void sweep(int pings){ double *points=grid[0];
    for (int i=0;i<pings;i++) points[i]=grid[1][2]; }
""", {"pings": 9}),
    ("flat static2", """\
static double grid[4][6];
void sweep(void){
    for (int i=0;i<4;i++) { double *points=grid[i];
    for (int j=0;j<6;j++) points[j]=grid[i][5-j]; } }
""", {}),
)
