// Solves one minimum-cost-flow problem with the network simplex of LEMON and says how long it took.
//
// Reads from the file that is named, in the byte order of this machine: int64 nodes, int64 arcs,
// then int32 tail[arcs], int32 head[arcs], int64 capacity[arcs], cost[arcs], supply[nodes].
// Writes one JSON object: the cost, seconds from columns to optimum, and the memory this took.

#include <lemon/network_simplex.h>
#include <lemon/smart_graph.h>

#include <sys/resource.h>

#include <chrono>
#include <cstdint>
#include <cstdio>
#include <vector>

using Graph = lemon::SmartDigraph;
using Simplex = lemon::NetworkSimplex<Graph, std::int64_t, std::int64_t>;

template <typename Number>
static std::vector<Number> column(std::FILE* file, std::size_t rows) {
  std::vector<Number> values(rows);
  if (std::fread(values.data(), sizeof(Number), rows, file) != rows) {
    std::fprintf(stderr, "the file is too short\n");
    std::exit(2);
  }
  return values;
}

static long peak_kibibytes() {
  rusage usage;
  getrusage(RUSAGE_SELF, &usage);
  return usage.ru_maxrss;
}

static double processor_seconds() {
  rusage usage;
  getrusage(RUSAGE_SELF, &usage);
  return usage.ru_utime.tv_sec + usage.ru_stime.tv_sec +
         1e-6 * (usage.ru_utime.tv_usec + usage.ru_stime.tv_usec);
}

int main(int count, char** words) {
  std::FILE* file = count == 2 ? std::fopen(words[1], "rb") : nullptr;
  if (file == nullptr) {
    std::fprintf(stderr, "name one file that can be read\n");
    return 2;
  }
  const auto sizes = column<std::int64_t>(file, 2);
  const auto nodes = static_cast<std::size_t>(sizes[0]);
  const auto arcs = static_cast<std::size_t>(sizes[1]);
  const auto tail = column<std::int32_t>(file, arcs);
  const auto head = column<std::int32_t>(file, arcs);
  const auto capacity = column<std::int64_t>(file, arcs);
  const auto cost = column<std::int64_t>(file, arcs);
  const auto supply = column<std::int64_t>(file, nodes);
  std::fclose(file);

  const long before = peak_kibibytes();
  const double worked = processor_seconds();
  const auto began = std::chrono::steady_clock::now();
  Graph graph;
  graph.reserveNode(static_cast<int>(nodes));
  graph.reserveArc(static_cast<int>(arcs));
  for (std::size_t node = 0; node < nodes; ++node) graph.addNode();
  for (std::size_t arc = 0; arc < arcs; ++arc) {
    graph.addArc(graph.nodeFromId(tail[arc]), graph.nodeFromId(head[arc]));
  }
  Graph::ArcMap<std::int64_t> upper(graph);
  Graph::ArcMap<std::int64_t> price(graph);
  Graph::NodeMap<std::int64_t> given(graph);
  for (std::size_t arc = 0; arc < arcs; ++arc) {
    upper[graph.arcFromId(static_cast<int>(arc))] = capacity[arc];
    price[graph.arcFromId(static_cast<int>(arc))] = cost[arc];
  }
  for (std::size_t node = 0; node < nodes; ++node) {
    given[graph.nodeFromId(static_cast<int>(node))] = supply[node];
  }
  Simplex simplex(graph);
  const auto status = simplex.upperMap(upper).costMap(price).supplyMap(given).run();
  const std::chrono::duration<double> taken = std::chrono::steady_clock::now() - began;
  if (status != Simplex::OPTIMAL) {
    std::fprintf(stderr, "no optimum: %d\n", static_cast<int>(status));
    return 1;
  }
  std::printf(
      "{\"objective\": %lld, \"seconds\": %.6f, \"cpu_seconds\": %.6f, \"added_bytes\": %ld}\n",
      static_cast<long long>(simplex.totalCost<std::int64_t>()), taken.count(),
      processor_seconds() - worked, 1024 * (peak_kibibytes() - before));
  return 0;
}
