/* Stand-in for <math.h> (ISO C N1570 7.12) with the usual constants. */
#ifndef STEPRING_MATH_H
#define STEPRING_MATH_H
typedef float float_t;
typedef double double_t;
#define HUGE_VAL __builtin_huge_val ()
#define INFINITY __builtin_inff ()
#define NAN __builtin_nanf ("")
#define M_E 2.7182818284590452354
#define M_LOG2E 1.4426950408889634074
#define M_LN2 0.69314718055994530942
#define M_LN10 2.30258509299404568402
#define M_PI 3.14159265358979323846
#define M_PI_2 1.57079632679489661923
#define M_PI_4 0.78539816339744830962
#define M_1_PI 0.31830988618379067154
#define M_2_PI 0.63661977236758134308
#define M_SQRT2 1.41421356237309504880
#define M_SQRT1_2 0.70710678118654752440
#define isnan(value) __builtin_isnan (value)
#define isinf(value) __builtin_isinf (value)
#define isfinite(value) __builtin_isfinite (value)
#define signbit(value) __builtin_signbit (value)
double acos (double value);
double asin (double value);
double atan (double value);
double cos (double value);
double sin (double value);
double tan (double value);
double acosh (double value);
double asinh (double value);
double atanh (double value);
double cosh (double value);
double sinh (double value);
double tanh (double value);
double exp (double value);
double exp2 (double value);
double expm1 (double value);
double log (double value);
double log10 (double value);
double log1p (double value);
double log2 (double value);
double logb (double value);
double cbrt (double value);
double fabs (double value);
double sqrt (double value);
double erf (double value);
double erfc (double value);
double lgamma (double value);
double tgamma (double value);
double ceil (double value);
double floor (double value);
double nearbyint (double value);
double rint (double value);
double round (double value);
double trunc (double value);
double atan2 (double left, double right);
double hypot (double left, double right);
double pow (double left, double right);
double fmod (double left, double right);
double remainder (double left, double right);
double copysign (double left, double right);
double nextafter (double left, double right);
double fdim (double left, double right);
double fmax (double left, double right);
double fmin (double left, double right);
double fma (double left, double right, double addend);
double ldexp (double value, int exponent);
double frexp (double value, int *exponent);
double modf (double value, double *whole);
long lrint (double value);
long lround (double value);
long long llround (double value);
int ilogb (double value);
float acosf (float value);
float asinf (float value);
float atanf (float value);
float cosf (float value);
float sinf (float value);
float tanf (float value);
float acoshf (float value);
float asinhf (float value);
float atanhf (float value);
float coshf (float value);
float sinhf (float value);
float tanhf (float value);
float expf (float value);
float exp2f (float value);
float expm1f (float value);
float logf (float value);
float log10f (float value);
float log1pf (float value);
float log2f (float value);
float logbf (float value);
float cbrtf (float value);
float fabsf (float value);
float sqrtf (float value);
float erff (float value);
float erfcf (float value);
float lgammaf (float value);
float tgammaf (float value);
float ceilf (float value);
float floorf (float value);
float nearbyintf (float value);
float rintf (float value);
float roundf (float value);
float truncf (float value);
float atan2f (float left, float right);
float hypotf (float left, float right);
float powf (float left, float right);
float fmodf (float left, float right);
float remainderf (float left, float right);
float copysignf (float left, float right);
float nextafterf (float left, float right);
float fdimf (float left, float right);
float fmaxf (float left, float right);
float fminf (float left, float right);
float fmaf (float left, float right, float addend);
float ldexpf (float value, int exponent);
float frexpf (float value, int *exponent);
float modff (float value, float *whole);
long lrintf (float value);
long lroundf (float value);
long long llroundf (float value);
int ilogbf (float value);
long double acosl (long double value);
long double asinl (long double value);
long double atanl (long double value);
long double cosl (long double value);
long double sinl (long double value);
long double tanl (long double value);
long double acoshl (long double value);
long double asinhl (long double value);
long double atanhl (long double value);
long double coshl (long double value);
long double sinhl (long double value);
long double tanhl (long double value);
long double expl (long double value);
long double exp2l (long double value);
long double expm1l (long double value);
long double logl (long double value);
long double log10l (long double value);
long double log1pl (long double value);
long double log2l (long double value);
long double logbl (long double value);
long double cbrtl (long double value);
long double fabsl (long double value);
long double sqrtl (long double value);
long double erfl (long double value);
long double erfcl (long double value);
long double lgammal (long double value);
long double tgammal (long double value);
long double ceill (long double value);
long double floorl (long double value);
long double nearbyintl (long double value);
long double rintl (long double value);
long double roundl (long double value);
long double truncl (long double value);
long double atan2l (long double left, long double right);
long double hypotl (long double left, long double right);
long double powl (long double left, long double right);
long double fmodl (long double left, long double right);
long double remainderl (long double left, long double right);
long double copysignl (long double left, long double right);
long double nextafterl (long double left, long double right);
long double fdiml (long double left, long double right);
long double fmaxl (long double left, long double right);
long double fminl (long double left, long double right);
long double fmal (long double left, long double right, long double addend);
long double ldexpl (long double value, int exponent);
long double frexpl (long double value, int *exponent);
long double modfl (long double value, long double *whole);
long lrintl (long double value);
long lroundl (long double value);
long long llroundl (long double value);
int ilogbl (long double value);
double square (double value);
#endif
