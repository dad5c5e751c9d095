/* The program `pulsewright-panel`: what will these pulses do? */
int main(void)
{
    return 2;
}
