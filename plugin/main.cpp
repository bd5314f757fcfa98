// SPDX-License-Identifier: Apache-2.0
#include "plugin/cli/run.hpp"

int main(int argc, char** argv) { return halfturn::cli::run(argc, argv); }
