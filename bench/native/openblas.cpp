// Times OpenBLAS (serial) on square pieces: C += A B, the lower half of C += A Aᵀ, and a Cholesky factorization with the copy it destroys.
//   openblas MILLISECONDS ORDER …        one JSON line an order
#include "timing.h"
#include <algorithm>
#include <cstdlib>

extern "C" {
void dgemm_(const char*, const char*, const int*, const int*, const int*, const double*, const double*, const int*, const double*, const int*,
            const double*, double*, const int*);
void dsyrk_(const char*, const char*, const int*, const int*, const double*, const double*, const int*, const double*, double*, const int*);
void dpotrf_(const char*, const int*, double*, const int*, int*);
}

int main(int count, char** arguments) {
  const double time = std::atof(arguments[1]), one = 1;
  for (int k = 2; k < count; ++k) {
    const int n = std::atoi(arguments[k]);
    std::vector<double> a(size_t(n) * n), b(a.size()), c(a.size()), definite(a.size());
    for (size_t p = 0; p < a.size(); ++p) {
      a[p] = double((p * 7919) % 101) / 101 - 0.5;
      b[p] = a[p];
      definite[p] = p % (n + 1) == 0 ? n : a[p] * 0.01;
    }
    std::printf("{\"order\":%d,\"product\":", n);
    print(samples(time, [&] { dgemm_("N", "N", &n, &n, &n, &one, a.data(), &n, b.data(), &n, &one, c.data(), &n); }));
    std::printf(",\"rankUpdate\":");
    print(samples(time, [&] { dsyrk_("L", "N", &n, &n, &one, a.data(), &n, &one, c.data(), &n); }));
    std::printf(",\"cholesky\":");
    int status = 0;
    print(samples(time, [&] {
      std::copy(definite.begin(), definite.end(), b.begin());
      dpotrf_("L", &n, b.data(), &n, &status);
    }));
    if (status) return 3;
    std::printf("}\n");
  }
}
