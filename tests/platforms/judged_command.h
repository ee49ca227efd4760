// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// Every run of the command in arbitrated timing over DRAM writes its command log, which is read back and judged by the
// checker of tests/dram. (The baseline run writes none: a test that has one plays its protocol on its own.)
#pragma once

#include <memory>
#include <string>

namespace command_tests {

class JudgedCommand {
 public:
  // `arguments` as the shell is to see them, the verb first.
  explicit JudgedCommand(const std::string& arguments);
  std::string arguments() const;  // with the key that writes the log, if the run has one and they do not name it
  void judge(int status) const;   // after the run, which exited so; fails the test

 private:
  struct Run;
  std::string arguments_;
  std::shared_ptr<const Run> run_;  // null: nothing to judge
};

}  // namespace command_tests
