from service.command_line import main

main(prog_name="molwright")
