# bash completion for aureole
# shellcheck shell=bash disable=SC2207

_aureole() {
    local word=${COMP_WORDS[COMP_CWORD]} before=${COMP_WORDS[COMP_CWORD - 1]} verb='' i
    COMPREPLY=()
    for ((i = 1; i < COMP_CWORD; i++)); do
        case ${COMP_WORDS[i]} in
        predict | spectra | scenario | laws | inspect | heights)
            verb=${COMP_WORDS[i]}
            break
            ;;
        esac
    done

    local talk='--quiet --verbose --color --help' compute='--threads --memory --reproducible'
    local options
    case $verb in
    predict) options="--output --set --force --dry-run $compute $talk" ;;
    spectra) options="--output --law --set --force --threads --reproducible $talk" ;;
    scenario | laws) options='--help' ;;
    inspect) options="$talk" ;;
    heights)
        options="--output --force --centre --center --position-angle --inclination --distance --distance-error
            --strips --strip-width --bin --from --to --mask --beam --rms --noise --source-free-height --background
            --calibration-error --model --naive --disc-radius --sides $compute $talk"
        ;;
    *) options='--help --version' ;;
    esac

    # The value of an option; "--color=" comes as three words.
    [[ $word == = ]] && word=''
    [[ $before == = ]] && before=${COMP_WORDS[COMP_CWORD - 2]}
    case $before in
    --output | -o)
        compopt -o filenames 2>/dev/null
        COMPREPLY=($(compgen -d -- "$word"))
        [[ $verb == spectra ]] && COMPREPLY=($(compgen -f -- "$word"))
        return
        ;;
    --mask)
        compopt -o filenames 2>/dev/null
        COMPREPLY=($(compgen -f -- "$word"))
        return
        ;;
    --color)
        COMPREPLY=($(compgen -W 'auto always never' -- "$word"))
        return
        ;;
    --noise)
        COMPREPLY=($(compgen -W 'beam autocorrelation scatter' -- "$word"))
        return
        ;;
    --background)
        COMPREPLY=($(compgen -W 'measured fitted' -- "$word"))
        return
        ;;
    --model)
        COMPREPLY=($(compgen -W 'exponential gaussian sech2 two_exponential two_gaussian' -- "$word"))
        return
        ;;
    --sides)
        COMPREPLY=($(compgen -W 'both each' -- "$word"))
        return
        ;;
    --law | --set | --threads | --memory | --centre | --center | --position-angle | --inclination | --distance | \
        --distance-error | --strips | --strip-width | --bin | --from | --to | --beam | --rms | \
        --source-free-height | --calibration-error | --disc-radius)
        return
        ;;
    esac

    if [[ $word == -* ]]; then
        COMPREPLY=($(compgen -W "$options" -- "$word"))
        return
    fi
    case $verb in
    '') COMPREPLY=($(compgen -W 'predict spectra scenario laws inspect heights' -- "$word")) ;;
    scenario | laws)
        # The names the installed program has: the first word of each line.
        local names
        names=$("${COMP_WORDS[0]}" "$verb" 2>/dev/null | cut -d' ' -f1)
        COMPREPLY=($(compgen -W "$names" -- "$word"))
        ;;
    *)
        # Folders to go on into, and the files that fit the verb. Names with blanks stay whole.
        local IFS=$'\n' pattern='!*.@(fits|fit|fits.gz)'
        [[ $verb == predict || $verb == spectra ]] && pattern='!*.toml'
        [[ $verb == inspect ]] && pattern='!*.@(toml|fits|fit|fits.gz)'
        local extglob_was
        extglob_was=$(shopt -p extglob)
        shopt -s extglob
        compopt -o filenames 2>/dev/null
        COMPREPLY=($(compgen -d -- "$word") $(compgen -f -X "$pattern" -- "$word"))
        eval "$extglob_was"
        ;;
    esac
}

complete -F _aureole aureole
