// Samples of a task's wall time in milliseconds, for as long as it is given; printed as a JSON array.
#pragma once
#include <chrono>
#include <cstdio>
#include <vector>

/// Samples until `milliseconds` are used and there are three at least; the runs that find how often short tasks repeat inside a sample
/// (two at least) warm up.
template <class Task> std::vector<double> samples(double milliseconds, Task task) {
  using clock = std::chrono::steady_clock;
  auto elapsed = [](clock::time_point from) { return std::chrono::duration<double, std::milli>(clock::now() - from).count(); };
  task();
  int repeats = 1;
  for (;; repeats *= 2) {
    auto from = clock::now();
    for (int r = 0; r < repeats; ++r) task();
    if (elapsed(from) > 0.2) break;
  }
  std::vector<double> found;
  auto start = clock::now();
  while (elapsed(start) < milliseconds || found.size() < 3) {
    auto from = clock::now();
    for (int r = 0; r < repeats; ++r) task();
    found.push_back(elapsed(from) / repeats);
  }
  return found;
}

inline void print(const std::vector<double>& values) {
  std::printf("[");
  for (size_t k = 0; k < values.size(); ++k) std::printf("%s%.6g", k ? "," : "", values[k]);
  std::printf("]");
}
