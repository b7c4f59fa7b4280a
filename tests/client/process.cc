// SPDX-License-Identifier: Apache-2.0
// fork, exec, wait.
#include "client/process.h"

#include <fcntl.h>
#include <signal.h>
#include <sys/wait.h>
#include <unistd.h>

#include <algorithm>
#include <atomic>
#include <fstream>
#include <iterator>
#include <stdexcept>

namespace steelyard::client {
namespace {

namespace fs = std::filesystem;

void redirect(const std::string& path, int flags, int to) {
  const int from = ::open(path.c_str(), flags, 0600);
  if (from < 0 || ::dup2(from, to) < 0) _exit(126);
}

}  // namespace

Folder::Folder() {
  std::string name = (fs::temp_directory_path() / "steelyard-test-XXXXXX").string();
  if (::mkdtemp(name.data()) == nullptr) throw std::runtime_error("no temporary folder");
  folder_ = name;
}

Folder::~Folder() {
  std::error_code ignored;
  fs::remove_all(folder_, ignored);
}

std::string Folder::write(const std::string& name, const std::string& text) const {
  std::ofstream(folder_ / name, std::ios::binary) << text;
  return path(name);
}

std::vector<std::string> Folder::names() const {
  std::vector<std::string> names;
  for (const auto& entry : fs::directory_iterator(folder_)) names.push_back(entry.path().filename().string());
  std::sort(names.begin(), names.end());
  return names;
}

std::string read_file(const std::string& path) {
  std::ifstream file(path, std::ios::binary);
  return {std::istreambuf_iterator<char>(file), {}};
}

Process::Process(const Folder& folder, const std::vector<std::string>& arguments, const std::string& input) {
  static std::atomic<int> runs = 0;
  const std::string stem = folder.path(".run-" + std::to_string(++runs));
  out_path_ = stem + ".out";
  err_path_ = stem + ".err";
  std::vector<char*> pointers;
  for (const std::string& argument : arguments) pointers.push_back(const_cast<char*>(argument.c_str()));
  pointers.push_back(nullptr);
  id_ = ::fork();
  if (id_ < 0) throw std::runtime_error("cannot fork");
  if (id_ > 0) return;
  redirect(input, O_RDONLY, STDIN_FILENO);
  redirect(out_path_, O_WRONLY | O_CREAT | O_TRUNC, STDOUT_FILENO);
  redirect(err_path_, O_WRONLY | O_CREAT | O_TRUNC, STDERR_FILENO);
  ::execv(pointers.front(), pointers.data());
  _exit(127);
}

Process::~Process() {
  if (id_ <= 0) return;
  ::kill(id_, SIGKILL);
  ::waitpid(id_, nullptr, 0);
}

void Process::signal(int number) const {
  if (id_ > 0) ::kill(id_, number);
}

Finished Process::wait() {
  int status = 0;
  if (id_ > 0) ::waitpid(id_, &status, 0);
  id_ = -1;
  const int code = WIFEXITED(status) ? WEXITSTATUS(status) : 128 + WTERMSIG(status);
  return {code, out(), err()};
}

std::string Process::out() const { return read_file(out_path_); }
std::string Process::err() const { return read_file(err_path_); }

Finished run(const Folder& folder, const std::vector<std::string>& arguments, const std::string& input) {
  return Process(folder, arguments, input).wait();
}

}  // namespace steelyard::client
