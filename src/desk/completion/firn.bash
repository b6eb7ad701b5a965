# firn.bash - completion for bash: commands and options are those that the program's own help shows
# SPDX-License-Identifier: BSD-2-Clause

# What the value of an option is called in the help: "FILE" for --output; nothing for a switch, or no option.
_firn_value()
{
    "$1" "$2" --help 2>/dev/null | sed -n "/^options:/,/^$/s/^  \(-[A-Za-z],\|   \) --${3#--} \([A-Z][A-Z/:]*\)  .*/\2/p"
}

_firn_words()
{
    case $3 in
        --algorithm) echo sha256 sha512 md5 ;;
        --effort) echo none quick normal thorough ;;
        --incomplete) echo keep ;;
        --owner) echo none names numbers ;;
        --system) echo 37-2 37,36 11-2 ;;
        --medium) "$1" "$2" --list-media 2>/dev/null | sed -n '/^$/q; s/ .*//p' ;;
    esac
}

_firn()
{
    local program=${COMP_WORDS[0]} command=${COMP_WORDS[1]-} word=${COMP_WORDS[COMP_CWORD]} before value
    before=${COMP_WORDS[COMP_CWORD - 1]}
    COMPREPLY=()
    if [ "$COMP_CWORD" -eq 1 ]; then
        # shellcheck disable=SC2207
        COMPREPLY=($(compgen -W "$("$program" --help 2>/dev/null | sed -n 's/^  \([a-z]*\)  *.*/\1/p') --help --version" -- "$word"))
        return
    fi
    case $before in
        -o) before=--output ;;
        -C) before=--directory ;;
    esac
    case $before in --*) value=$(_firn_value "$program" "$command" "$before") ;; esac
    # shellcheck disable=SC2207
    if [ -n "$(_firn_words "$program" "$command" "$before")" ]; then
        COMPREPLY=($(compgen -W "$(_firn_words "$program" "$command" "$before")" -- "$word"))
    elif [ "${value-}" = DIR ]; then
        compopt -o filenames 2>/dev/null
        COMPREPLY=($(compgen -d -- "$word"))
    elif [ -n "${value-}" ] && [ "$value" != FILE ] && [ "$value" != A ] && [ "$value" != MANIFEST ]; then
        return
    elif [ -z "${value-}" ] && [[ $word == -* ]]; then
        COMPREPLY=($(compgen -W "$("$program" "$command" --help 2>/dev/null | sed -n '/^options:/,/^$/s/^  \(-[A-Za-z],\|   \) \(--[a-z-]*\).*/\2/p')" -- "$word"))
    elif [ "$command" = label ] && [ "$COMP_CWORD" -eq 2 ]; then
        COMPREPLY=($(compgen -W 'new check' -- "$word"))
    else
        compopt -o filenames 2>/dev/null
        local IFS=$'\n'
        COMPREPLY=($(compgen -f -- "$word"))
    fi
}

complete -F _firn firn
