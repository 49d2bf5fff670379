// Times Eigen's SimplicialLLT with its AMD order on a matrix, one task a call: its samples as a JSON array, or the facts of its factor.
//   eigen FILE MILLISECONDS analyze|factor|solve|solveTen|facts
// FILE: i32 order, i32 entries, i32 columnPointers[order + 1], i32 rowIndices[entries], f64 values[entries]; the lower triangle.
#include "timing.h"
#include <Eigen/Sparse>
#include <cstdint>
#include <cstdlib>
#include <string>

using Matrix = Eigen::SparseMatrix<double>;
struct Solver : Eigen::SimplicialLLT<Matrix> {
  /// L as it is stored: the base class shows it through a view only.
  const Matrix& stored() const { return m_matrix; }
};

int main(int, char** arguments) {
  FILE* file = std::fopen(arguments[1], "rb");
  if (!file) return 2;
  std::int32_t size[2];
  auto read = [file](void* to, size_t bytes) {
    if (std::fread(to, 1, bytes, file) != bytes) std::exit(2);
  };
  read(size, sizeof size);
  const int n = size[0], entries = size[1];
  std::vector<std::int32_t> columnPointers(n + 1), rowIndices(entries);
  std::vector<double> values(entries);
  read(columnPointers.data(), 4 * columnPointers.size());
  read(rowIndices.data(), 4 * rowIndices.size());
  read(values.data(), 8 * values.size());
  std::fclose(file);
  const double time = std::atof(arguments[2]);
  Matrix matrix = Eigen::Map<Matrix>(n, n, entries, columnPointers.data(), rowIndices.data(), values.data());

  const std::string task = arguments[3];

  Solver solver;
  if (task == "analyze") {
    print(samples(time, [&] { solver.analyzePattern(matrix); }));
    return 0;
  }
  solver.analyzePattern(matrix);
  if (task == "facts") {
    double flops = 0;
    const auto* start = solver.stored().outerIndexPtr();
    for (int j = 0; j < n; ++j) flops += double(start[j + 1] - start[j]) * (start[j + 1] - start[j]);
    std::printf("{\"nonzeros\":%lld,\"flops\":%.0f}\n", static_cast<long long>(start[n]), flops);
    return 0;
  }
  if (task == "factor") print(samples(time, [&] { solver.factorize(matrix); }));
  else solver.factorize(matrix);
  if (solver.info() != Eigen::Success) return 3;
  if (task == "factor") return 0;
  const Eigen::MatrixXd rhs = Eigen::MatrixXd::Random(n, task == "solve" ? 1 : 10);
  Eigen::MatrixXd solution;
  print(samples(time, [&] { solution = solver.solve(rhs); }));
}
