// A typed way through a TOML document: every value is asked for by name, type and range, every key that
// nobody asked for is an error, and every error says file:line:column, what was found and what was expected.
#pragma once

#include <functional>
#include <optional>
#include <string>
#include <string_view>
#include <vector>

#include <toml++/toml.h>

namespace coldpin::profile {

// Throws UsageError for broken syntax.
toml::table parse_toml(const std::string& text, const std::string& source);

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
    int line_of(std::string_view key) const;

    std::optional<double> number(std::string_view key, Range range = {});
    double need_number(std::string_view key, Range range = {});
    std::optional<int> whole(std::string_view key, int low, int high);
    std::optional<std::string> text(std::string_view key);
    std::string need_text(std::string_view key);
    std::string choice(std::string_view key, const std::vector<std::string_view>& choices,
                       std::string_view otherwise);
    std::optional<bool> flag(std::string_view key);
    std::vector<std::string> texts(std::string_view key);
    std::vector<double> numbers(std::string_view key, Range range = {});  // a number alone is a list of one
    std::vector<int> whole_numbers(std::string_view key, int low, int high);
    // Calls `read` with the table of that name, if there is one.
    void table(std::string_view key, const std::function<void(TableReader&)>& read);
    // Calls `read` for each table of an array of tables ([[key]]).
    void tables(std::string_view key, const std::function<void(TableReader&)>& read);
    // Calls `read` for each entry of the table of that name, whatever the entries are called.
    void entries(std::string_view key,
                 const std::function<void(const std::string& name, double value)>& read);
    void named_tables(std::string_view key,
                      const std::function<void(const std::string& name, TableReader&)>& read);

    // Throws UsageError for a key that was never asked for, naming the nearest one that would have been.
    void finish() const;
    // Throws UsageError at a key (or at the table when there is no such key).
    [[noreturn]] void fail(std::string_view key, const std::string& message) const;

  private:
    const toml::node* ask(std::string_view key);
    [[noreturn]] void fail_type(std::string_view key, const toml::node& node,
                                std::string_view expected) const;
    double checked(std::string_view key, const toml::node& node, Range range) const;
    std::string place(const toml::source_region& region) const;

    const toml::table& table_;
    std::string source_;
    std::string path_;
    std::vector<std::string_view> asked_;
};

}  // namespace coldpin::profile
