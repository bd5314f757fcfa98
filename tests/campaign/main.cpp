// SPDX-License-Identifier: Apache-2.0
#include <CLI/CLI.hpp>
#include <fstream>
#include <iostream>
#include <optional>
#include <thread>

#include "tests/campaign/compare.hpp"
#include "tests/campaign/limits.hpp"
#include "tests/campaign/run.hpp"
#include "tests/campaign/targets.hpp"

using namespace halfturn::campaign;

namespace {

struct Wish {
  Order order;
  std::string family, dump, score;
  std::optional<std::uint64_t> index;
  bool json = false, check = false, limits = false;
};

void describe(CLI::App& app, Wish& wish) {
  wish.order.threads = static_cast<int>(std::max(1u, std::thread::hardware_concurrency()));
  app.add_option("--scans", wish.order.scans, "how many in all, shared evenly among families and seeds")->check(CLI::PositiveNumber)->capture_default_str();
  app.add_option("--seed,--seeds", wish.order.seeds, "such as 1,2,3: the same seed gives the same scans")->delimiter(',')->capture_default_str();
  app.add_option("--family", wish.family, "this family alone");
  app.add_option("--index", wish.index, "with --family: show this scan, its truth and its reply")->needs("--family");
  app.add_option("--threads", wish.order.threads, "how many")->check(CLI::PositiveNumber)->capture_default_str();
  app.add_flag("--json", wish.json, "JSON instead of a table");
  app.add_flag("--check", wish.check, "exit with 1 where a figure is outside its band, widened to a chance of one in a million");
  app.add_flag("--limits", wish.limits, "of figures out of band: what no procedure could reach on the same scans, beside what is reached");
  app.add_option("--dump", wish.dump, "write the scans to this file, a JSON object a line, and fit none");
  app.add_option("--score", wish.score, "score another pipeline's answers to such scans from this file, beside one's own");
}

std::vector<const Family*> families_for(const std::string& name) {
  std::vector<const Family*> wanted;
  for (const auto& family : families())
    if (name.empty() || name == family.name) wanted.push_back(&family);
  if (!wanted.empty()) return wanted;
  std::cerr << "--family: found `" << name << "`, expected one of";
  for (const auto& family : families()) std::cerr << ' ' << family.name;
  std::cerr << '\n';
  return wanted;
}

int dumped(const Wish& wish, const std::vector<const Family*>& wanted) {
  std::ofstream file(wish.dump);
  dump(file, wish.order, wanted);
  if (file) return 0;
  std::cerr << "--dump: could not write " << wish.dump << '\n';
  return 2;
}

int compared(const Wish& wish) {
  std::ifstream file(wish.score);
  if (!file) {
    std::cerr << "--score: could not read " << wish.score << '\n';
    return 2;
  }
  try {
    print_comparison(std::cout, compare(file, wish.order.threads));
    return 0;
  } catch (const BadAnswers& bad) {
    std::cerr << bad.what() << '\n';
    return 2;
  }
}

bool lost_output() {
  std::cout.flush();
  if (std::cout) return false;
  std::cerr << "standard output could not be written: the result is lost\n";
  return true;
}

int limited(const Wish& wish, std::vector<const Family*> wanted) {
  if (wish.family.empty()) std::erase_if(wanted, [](const Family* family) { return !has_limits(*family); });
  const auto found = limits(wish.order, wanted);
  wish.json ? print_limits_json(std::cout, found) : print_limits(std::cout, found);
  return lost_output() ? 2 : 0;
}

int campaign(const Wish& wish, const std::vector<const Family*>& wanted) {
  const auto result = run(wish.order, wanted);
  wish.json ? print_json(std::cout, result) : print_table(std::cout, result);
  if (lost_output()) return 2;
  if (!wish.check) return 0;
  const auto failed = failures(result);
  for (const auto& sentence : failed) std::cerr << sentence << '\n';
  return failed.empty() ? 0 : 1;
}

}  // namespace

int main(int argc, char** argv) {
  Wish wish;
  CLI::App app{"Simulated scans, fitted and decided as the daemon would, and held against the truth."};
  describe(app, wish);
  CLI11_PARSE(app, argc, argv);
  if (!wish.score.empty()) return compared(wish);
  const auto wanted = families_for(wish.family);
  if (wanted.empty()) return 2;
  if (!wish.dump.empty()) return dumped(wish, wanted);
  if (wish.limits) return limited(wish, wanted);
  if (!wish.index) return campaign(wish, wanted);
  print_case(std::cout, draw(*wanted.front(), wish.order.seeds.front(), *wish.index), *wanted.front());
  return 0;
}
