"""Nests that cannot be read: (why, text, line and code of every refusal).  All code is invented."""

REFUSED: tuple[tuple[str, str, tuple[tuple[int, str], ...]], ...] = (
    ("call", """\
void other(void);
void sweep(int pings,double *depth) {
    for (int i= 0;i<pings; i++){ depth[i]=1; other(); } }
""", ((3, "call"),)),
    ("fnptr", """\
void sweep(int pings,double *depth,double(*hook)(double)) {
    for (int i= 0;i<pings; i++) depth[i]=hook(depth[i]); }
""", ((2, "call"),)),
    ("impure", """\
static int count;
static double other(double x){ count++; return x; }
void sweep(int pings,double *depth) {
    for (int i= 0;i<pings; i++) depth[i]=other(depth[i]); }
""", ((4, "call"),)),
    ("break", """\
void sweep(int pings,double *depth) {
    for (int i= 0;i<pings; i++){ if (depth[i]>0) break; depth[i]=1; } }
""", ((2, "break"),)),
    ("continue", """\
void sweep(int pings,double *depth) {
    for (int i= 0;i<pings; i++){ if (depth[i]>0) continue; else continue; depth[i]=1; } }
""", ((2, "continue"),)),
    ("goto", """\
void sweep(int pings,double *depth) {
    for (int i= 0;i<pings; i++){ if (depth[i]>0) goto out; depth[i]=1; }
out:; }
""", ((2, "goto"),)),
    ("label", """\
void sweep(int pings,double *depth) {
    for (int i= 0;i<pings; i++){ again: depth[i]=1; } }
""", ((2, "label"),)),
    ("return", """\
int sweep(int pings,double *depth) {
    for (int i= 0;i<pings; i++){ if (depth[i]>0) return i; } return 0; }
""", ((2, "return"),)),
    ("while", """\
void sweep(int pings,double *depth) {
    for (int i= 0;i<pings; i++) while (depth[i]>0) depth[i]-=1; }
""", ((2, "while"),)),
    ("switch", """\
void sweep(int pings,int *depth) {
    for (int i= 0;i<pings; i++) switch(depth[i]) { case 1: depth[i]= 0; } }
""", ((2, "switch"),)),
    ("volatile", """\
void sweep(int pings,volatile double *depth) {
    for (int i= 0;i<pings; i++) depth[i]=1; }
""", ((2, "volatile"),)),
    ("volatile iter", """\
void sweep(int pings,double *depth){
volatile int i; for(i= 0;i<pings; i++) depth[i]=1; }
""", ((2, "volatile"),)),
    ("volatile td", """\
typedef volatile int watched;
void sweep(int pings,watched *depth) {
    for (int i= 0;i<pings; i++) depth[i]=1; }
""", ((3, "volatile"),)),
    ("volatile bound", """\
void sweep(volatile int pings,double *depth) {
    for (int i= 0;i<pings; i++) depth[i]=1; }
""", ((2, "bound"),)),
    ("atomic", """\
void sweep(int pings,_Atomic int *depth) {
    for (int i= 0;i<pings; i++) depth[i]=1; }
""", ((2, "atomic"),)),
    ("asm", """\
void sweep(int pings,double *depth) {
    for (int i= 0;i<pings; i++){ depth[i]=1; __asm__("nop"); } }
""", ((2, "asm"),)),
    ("iter changed", """\
void sweep(int pings,double *depth) {
    for (int i= 0;i<pings; i++){ depth[i]=1; i++; } }
""", ((2, "iterator-changed"),)),
    ("iter changed2", """\
void sweep(int pings,double *depth) {
    for (int i= 0;i<pings; i++){ depth[i]=1; if (depth[i]>3) i=pings; } }
""", ((2, "iterator-changed"),)),
    ("iter again", """\
void sweep(int pings,double *depth){ int i;
    for (i= 0;i<pings; i++)
    for (i= 0;i<pings; i++) depth[i]=1; }
""", ((3, "infinite-loop"),)),
    ("bound changed", """\
void sweep(int pings,double *depth) {
    for (int i= 0;i<pings; i++){ depth[i]=1; pings--; } }
""", ((2, "bound-changed"),)),
    ("bound mem", """\
void sweep(int *pings,double *depth) {
    for (int i= 0;i<pings[0]; i++){ depth[i]=1; pings[0]=3; } }
""", ((2, "bound-changed"),)),
    ("bound mem2", """\
void sweep(int *pings,double *depth) {
    for (int i= 0;i<*pings; i++){ depth[i]=1; *pings=3; } }
""", ((2, "bound-changed"),)),
    ("bound member", """\
struct other{int pings; double *d;};
void sweep(struct other *other) {
    for (int i= 0;i<other->n; i++){ other->d[i]=1; other->n--; } }
""", ((3, "bound"),)),
    ("iter addr", """\
void hook(int*);
void sweep(int pings,double *depth){ int i; hook(&i);
    for (i= 0;i<pings; i++){ depth[i]=1; } }
""", ((3, "iterator-address"),)),
    ("indirect pointer", """\
struct cell{double v[4]; double w[4];};
void sweep(int pings,struct cell *depth,int *place) {
    for (int i= 0;i<pings; i++) { double *to = &depth[i].v[0]; to[place[i]]=1; } }
""", ((3, "pointer"),)),
    ("union", """\
union cell{int i; float f[2];};
void sweep(int pings,union cell *depth) {
    for (int i= 0;i<pings; i++) depth[i].f[1]=1; }
""", ((3, "union"),)),
    ("anon union", """\
struct cell{union{int i; float sweep;};};
void sweep(int pings,struct cell *depth) {
    for (int i= 0;i<pings; i++) depth[i].f=1; }
""", ((3, "unsupported"),)),
    ("bitfield", """\
struct cell{int i:3, j:4;};
void sweep(int pings,struct cell *depth) {
    for (int i= 0;i<pings; i++) depth[i].i=1; }
""", ((3, "bit-field"),)),
    ("float iter", """\
void sweep(int pings,double *depth) {
    for (float i= 0;i<pings; i++) depth[(int)i]=1; }
""", ((2, "iterator-type"),)),
    ("ptr iter", """\
void sweep(int pings,double *depth) {
    for (double *place=depth;place<depth+pings;place++) *place=1; }
""", ((2, "iterator-type"),)),
    ("hash if", """\
void sweep(int pings,double *depth) {
    for (int i= 0;i<pings; i++){
#if 1
 depth[i]=1;
#endif
} }
""", ((3, "directive"), (5, "directive"))),
    ("omp", """\
void sweep(int pings,double *depth){
#pragma omp parallel for
    for (int i= 0;i<pings; i++) depth[i]=1; }
""", ((2, "directive"),)),
    ("omp in", """\
void sweep(int pings,double *depth) {
    for (int i= 0;i<pings; i++)
#pragma omp simd
    for (int j= 0;j<pings;j++) depth[i*pings+j]=1; }
""", ((3, "directive"),)),
    ("vla in", """\
void sweep(int pings,double *depth) {
    for (int i= 0;i<pings; i++){ double part[pings]; part[0]=1; depth[i]=part[0]; } }
""", ((2, "vla"),)),
    ("stmt expr", """\
void sweep(int pings,double *depth) {
    for (int i= 0;i<pings; i++) depth[i]=({ int q=3; q; }); }
""", ((2, "statement-expression"),)),
    ("comma", """\
void sweep(int pings,double *depth){ int i,j;
    for (i=0,j= 0;i<pings;i++,j++) depth[i]=j; }
""", ((2, "loop-form"),)),
    ("infinite", """\
void sweep(int pings,double *depth) {
    for (int i= 0;; i++) depth[i]=1; }
""", ((2, "infinite-loop"),)),
    ("infinite2", """\
void sweep(double *depth) {
    for (unsigned char i= 0;i<256; i++) depth[i]=1; }
""", ((2, "infinite-loop"),)),
    ("infinite3", """\
void sweep(unsigned pings,double *depth) {
    for (unsigned i=pings;i>= 0;i--) depth[i]=1; }
""", ((2, "infinite-loop"),)),
    ("step0", """\
void sweep(int pings,double *depth) {
    for (int i= 0;i<pings;i+=0) depth[i]=1; }
""", ((2, "step"),)),
    ("step var", """\
void sweep(int pings,int stride,double *depth) {
    for (int i= 0;i<pings;i+=stride) depth[i]=1; }
""", ((2, "step"),)),
    ("step mul", """\
void sweep(int pings,double *depth) {
    for (int i=1;i<pings;i*=2) depth[i]=1; }
""", ((2, "step"),)),
    ("wrong dir", """\
void sweep(int pings,double *depth) {
    for (int i= 0;i<pings;i--) depth[i]=1; }
""", ((2, "loop-direction"),)),
    ("cond side", """\
void sweep(int pings,double *depth) {
    for (int i= 0;i<pings--; i++) depth[i]=1; }
""", ((2, "loop-condition"),)),
    ("cond data", """\
void sweep(int pings,double *depth,int *done) {
    for (int i= 0;i<pings && !*done; i++) depth[i]=1; }
""", ((2, "bound"),)),
    ("struct asg", """\
struct stride{double *x;};
void sweep(int pings,struct stride *depth,struct stride *echo) {
    for (int i= 0;i<pings; i++) depth[i]=echo[i]; }
""", ((3, "struct-assignment"),)),
    ("ptr walk", """\
void sweep(int pings,double *depth) {
    for (int i= 0;i<pings; i++) *depth++=1; }
""", ((2, "pointer-assigned"),)),
    ("ptr walk2", """\
void sweep(int pings,double *depth) {
    for (int i= 0;i<pings; i++){ *depth=1; depth+=2; } }
""", ((2, "pointer-assigned"), (2, "pointer-assigned"))),
    ("data end", """\
void sweep(int pings,int *last,double *depth) {
    for (int i= 0;i<pings; i++)
    for (int j= 0;j<last[i];j++) depth[i*pings+j]=1; }
""", ((3, "bound"),)),
    ("iter after", """\
void sweep(int pings,double *depth){ int j;
    for (int i= 0;i<pings; i++) {
    for (j= 0;j<pings;j++) depth[j]=1;
 depth[i]=j; } }
""", ((4, "iterator-outside"),)),
    ("no first", """\
void sweep(int pings,int i,double *depth) {
    for (;i<pings; i++) depth[i]=1; }
""", ((2, "loop-form"),)),
    ("char cast", """\
void sweep(int pings,double *depth) {
    for (int i= 0;i<pings; i++) ((char*)depth)[i]=1; }
""", ((2, "pointer"),)),
    ("macro stmt", """\
#define PUT(x) x = 1; x += 2
void sweep(int pings,double *depth) {
    for (int i= 0;i<pings; i++){ PUT(depth[i]); } }
""", ((3, "macro"),)),
    ("macro for", """\
#define LOOP(i,pings) for(int i= 0;i<pings; i++)
void sweep(int pings,double *depth) {
    for (int k= 0;k<2;k++)
LOOP(i,pings) depth[i]=1; }
""", ((3, "macro"),)),
    ("va", """\
void sweep(int pings,double *depth,double *echo) {
    for (int i= 0;i<pings; i++){ double *place = depth[i]>0 ? depth : echo; place[i]=1; } }
""", ((2, "pointer"),)),
    ("iter global", """\
int i;
void sweep(int pings,double *depth) {
    for (i= 0;i<pings; i++) depth[i]=1; }
""", ((3, "iterator-scope"),)),
    ("nested fn macro", """\
#include <stdio.h>
void sweep(int pings,double *depth) {
    for (int i= 0;i<pings; i++) printf("%g", depth[i]); }
""", ((3, "call"),)),
)
