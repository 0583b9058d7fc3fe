// A typed way through a TOML document: every value is asked for by name, type and range, every key that
// nobody asked for is an error, and every error is a UsageError of the shape
// "file:line:column: in [table] key: found X, expected Y; did you mean 'Z'?".
#pragma once

#include <functional>
#include <initializer_list>
#include <optional>
#include <string>
#include <string_view>
#include <vector>

#include <toml++/toml.h>

namespace coldpin::profile {

// Throws UsageError for broken syntax.
toml::table parse_toml(const std::string& text, const std::string& source);

// "; did you mean 'Z'?", or nothing when no candidate is near.
std::string did_you_mean(std::string_view word, const std::vector<std::string_view>& candidates);

// Text from a file, fit for a message: short, without control characters, valid UTF-8.
std::string shown(std::string_view text);

// "a, b or c"
std::string listed(const std::vector<std::string_view>& words);

struct Range {
    double low = -1e12;
    double high = 1e12;
};

class TableReader {
  public:
    // `path` names the table in messages, such as "[audio]"; empty for the document itself.
    TableReader(const toml::table& table, std::string source, std::string path);

    bool has(std::string_view key) const { return table_.contains(key); }
    int line() const;

    // Numbers are finite always; whole numbers serve as numbers, texts do not.
    std::optional<double> number(std::string_view key, Range range = {});
    double need_number(std::string_view key, Range range = {});
    std::optional<int> whole(std::string_view key, int low, int high);
    std::optional<std::string> text(std::string_view key);
    std::string need_text(std::string_view key);
    std::optional<std::string> choice(std::string_view key, const std::vector<std::string_view>& choices);
    std::string need_choice(std::string_view key, const std::vector<std::string_view>& choices);
    std::optional<bool> flag(std::string_view key);
    std::vector<std::string> texts(std::string_view key);
    std::vector<double> numbers(std::string_view key, Range range = {});  // a number alone is a list of one
    std::vector<int> whole_numbers(std::string_view key, int low, int high);
    // Calls `read` with the table of that name, if there is one.
    void table(std::string_view key, const std::function<void(TableReader&)>& read);
    // Calls `read` for each table of an array of tables ([[key]]).
    void tables(std::string_view key, const std::function<void(TableReader&)>& read);
    // Calls `read` for each entry of the table of that name, whatever the entries are called.
    void entries(std::string_view key, Range range,
                 const std::function<void(const std::string& name, double value)>& read);
    void named_tables(std::string_view key,
                      const std::function<void(const std::string& name, TableReader&)>& read);

    // finish(), ahead of all questions: a misspelt table is better named than missed.
    void allow_only(std::initializer_list<std::string_view> keys);
    // Throws UsageError for a key that was never asked for, naming the nearest one that would have been.
    void finish() const;
    // Throw UsageError at a key (at the table when there is no such key). `hint` follows as it is.
    [[noreturn]] void fail(std::string_view key, const std::string& found, const std::string& expected,
                           const std::string& hint = "") const;
    // ... for a key that is not there; a misspelt one in its place is pointed at.
    [[noreturn]] void fail_missing(std::string_view key, const std::string& expected) const;

  private:
    const toml::node* ask(std::string_view key);
    [[noreturn]] void fail_at(const toml::source_region& region, std::string_view key,
                              const std::string& found, const std::string& expected,
                              const std::string& hint) const;
    [[noreturn]] void fail_type(std::string_view key, const toml::node& node,
                                const std::string& expected) const;
    double checked(std::string_view key, const toml::node& node, Range range) const;
    int checked_whole(std::string_view key, const toml::node& node, int low, int high) const;
    bool asked(std::string_view key) const;
    std::string child_path(std::string_view key) const;

    const toml::table& table_;
    std::string source_;
    std::string path_;
    std::vector<std::string_view> asked_;
};

// The first key of every file: "coldpin-device/1". `kind` is the word between "coldpin-" and the number,
// `words` what the file is called. Throws UsageError for files of another kind or of a newer program.
void read_schema(TableReader& top, std::string_view kind, std::string_view words);

}  // namespace coldpin::profile
