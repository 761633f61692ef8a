#pragma once

#include <fcntl.h>
#include <sys/wait.h>
#include <unistd.h>

#include <cstdlib>
#include <filesystem>
#include <fstream>
#include <iterator>
#include <map>
#include <string>
#include <vector>

namespace rondel::testing {

struct Ran {
  int status = -1;  ///< exit status; 128 + signal when it was killed
  std::string out;
  std::string err;
};

inline std::string content_of(const std::filesystem::path& path) {
  std::ifstream in(path, std::ios::binary);
  return {std::istreambuf_iterator<char>(in), std::istreambuf_iterator<char>()};
}

/// Runs `program` with `arguments` in `folder`; what it prints goes through files beside it.
inline Ran run_in(const std::filesystem::path& folder,
                  const std::string& program,
                  const std::vector<std::string>& arguments) {
  const std::string out = folder.string() + ".stdout";
  const std::string err = folder.string() + ".stderr";
  std::vector<char*> argv = {const_cast<char*>(program.c_str())};
  for (const std::string& argument : arguments) argv.push_back(const_cast<char*>(argument.c_str()));
  argv.push_back(nullptr);
  const pid_t child = ::fork();
  if (child == 0) {
    const int mode = O_WRONLY | O_CREAT | O_TRUNC;
    if (::chdir(folder.c_str()) != 0) ::_exit(125);
    ::dup2(::open("/dev/null", O_RDONLY), STDIN_FILENO);
    ::dup2(::open(out.c_str(), mode, 0600), STDOUT_FILENO);
    ::dup2(::open(err.c_str(), mode, 0600), STDERR_FILENO);
    ::execv(program.c_str(), argv.data());
    ::_exit(126);
  }
  int status = 0;
  ::waitpid(child, &status, 0);
  Ran ran;
  ran.status = WIFEXITED(status) ? WEXITSTATUS(status) : 128 + WTERMSIG(status);
  ran.out = content_of(out);
  ran.err = content_of(err);
  return ran;
}

inline Ran rondel_in(const std::filesystem::path& folder,
                     const std::vector<std::string>& arguments) {
  return run_in(folder, RONDEL_PROGRAM, arguments);
}

/// All that is in a folder: relative path -> content ("<folder>" for folders).
inline std::map<std::string, std::string> snapshot(const std::filesystem::path& folder) {
  std::map<std::string, std::string> all;
  for (const auto& entry : std::filesystem::recursive_directory_iterator(folder)) {
    all[entry.path().lexically_relative(folder).string()] =
        entry.is_directory() ? "<folder>" : content_of(entry.path());
  }
  return all;
}

}  // namespace rondel::testing
