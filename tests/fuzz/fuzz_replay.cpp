// SPDX-License-Identifier: Apache-2.0
// Runs every file of a folder through the decoder, then seeded mutations of each: any compiler, the same bytes every time.
// fuzz_replay FOLDER [MUTATIONS]
#include <algorithm>
#include <cstdlib>
#include <filesystem>
#include <fstream>
#include <iostream>
#include <iterator>
#include <random>
#include <string>
#include <vector>

#include "tests/fuzz/decode_target.hpp"

namespace {

std::vector<std::string> read_folder(const std::string& folder) {
  std::vector<std::filesystem::path> paths;
  for (const auto& entry : std::filesystem::directory_iterator(folder)) paths.push_back(entry.path());
  std::sort(paths.begin(), paths.end());
  std::vector<std::string> files;
  for (const auto& path : paths) {
    std::ifstream in(path, std::ios::binary);
    files.emplace_back(std::istreambuf_iterator<char>(in), std::istreambuf_iterator<char>());
  }
  return files;
}

/// One to four changes: a byte replaced, a bit turned, a stretch removed, doubled, or taken from another file.
std::string mutate(std::string bytes, const std::vector<std::string>& files, std::mt19937_64& random) {
  const auto below = [&](std::size_t n) { return n == 0 ? 0 : static_cast<std::size_t>(random() % n); };
  for (std::size_t changes = 1 + below(4); changes > 0; --changes) {
    const std::size_t at = below(bytes.size() + 1), length = below(std::min<std::size_t>(bytes.size() - at, 16) + 1);
    const std::string& other = files[below(files.size())];
    switch (below(5)) {
      case 0: if (at < bytes.size()) bytes[at] = static_cast<char>(random()); break;
      case 1: if (at < bytes.size()) bytes[at] = static_cast<char>(bytes[at] ^ (1 << below(8))); break;
      case 2: bytes.erase(at, length); break;
      case 3: bytes.insert(at, bytes.substr(at, length)); break;
      default: bytes.insert(at, other.substr(below(other.size()), below(32))); break;
    }
  }
  return bytes;
}

}  // namespace

int main(int count, char** arguments) {
  if (count < 2) {
    std::cerr << "usage: fuzz_replay FOLDER [MUTATIONS]\n";
    return 2;
  }
  const std::vector<std::string> files = read_folder(arguments[1]);
  const long mutations = count > 2 ? std::atol(arguments[2]) : 2000;
  if (files.empty()) {
    std::cerr << "no files in " << arguments[1] << "\n";
    return 2;
  }
  std::mt19937_64 random(20260203);
  long runs = 0;
  for (const std::string& file : files) {
    halfturn::fuzz::decode_target(file);
    for (long i = 0; i < mutations; ++i, ++runs) halfturn::fuzz::decode_target(mutate(file, files, random));
  }
  std::cout << files.size() << " files and " << runs << " mutations\n";
}
