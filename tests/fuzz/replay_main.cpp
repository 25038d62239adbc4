// Runs a fuzz target without a fuzzer: over every file of the given files and folders, every beginning of the
// short ones, and some seeded mutations of each. For compilers that have no libFuzzer, and for every test
// run.
#include <algorithm>
#include <cstddef>
#include <cstdint>
#include <cstdio>
#include <filesystem>
#include <fstream>
#include <iterator>
#include <string>
#include <vector>

#include "driver/core/random.h"

extern "C" int LLVMFuzzerTestOneInput(const std::uint8_t* data, std::size_t size);

namespace {

namespace fs = std::filesystem;

constexpr int kMutations = 60;
constexpr std::size_t kShort = 400;  // bytes; longer inputs are not cut at every place

void runOne(const std::string& input) {
  LLVMFuzzerTestOneInput(reinterpret_cast<const std::uint8_t*>(input.data()), input.size());
}

std::string mutated(std::string input, shuntwright::Random& random) {
  for (std::uint64_t left = 1 + random.below(6); left > 0 && !input.empty(); --left) {
    const std::size_t at = random.below(input.size());
    switch (random.below(4)) {
      case 0:
        input[at] = static_cast<char>(random.below(256));
        break;
      case 1:
        input.erase(at, 1 + random.below(8));
        break;
      case 2:
        input.insert(at, input.substr(random.below(input.size()), random.below(16)));
        break;
      default:
        input[at] = static_cast<char>(input[at] ^ (1 << random.below(8)));
        break;
    }
  }
  return input;
}

}  // namespace

int main(int argc, char** argv) {
  std::vector<fs::path> files;
  for (int k = 1; k < argc; ++k) {
    if (fs::is_regular_file(argv[k])) files.emplace_back(argv[k]);
    if (!fs::is_directory(argv[k])) continue;
    for (const auto& entry : fs::recursive_directory_iterator(argv[k])) {
      if (entry.is_regular_file()) files.push_back(entry.path());
    }
  }
  std::sort(files.begin(), files.end());
  if (files.empty()) {
    std::fprintf(stderr, "no inputs: give the files or folders of a corpus\n");
    return 2;
  }
  std::size_t runs = 0;
  shuntwright::Random random(1);
  for (const auto& file : files) {
    std::ifstream in(file, std::ios::binary);
    const std::string input((std::istreambuf_iterator<char>(in)), std::istreambuf_iterator<char>());
    runOne(input);
    for (std::size_t end = 0; input.size() <= kShort && end < input.size(); ++end, ++runs)
      runOne(input.substr(0, end));
    for (int k = 0; k < kMutations; ++k) runOne(mutated(input, random));
    runs += 1 + kMutations;
  }
  std::printf("%zu runs over %zu files\n", runs, files.size());
  return 0;
}
